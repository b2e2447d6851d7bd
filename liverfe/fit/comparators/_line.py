"""Straight lines through the logarithm of the signal, one loop for all weights."""

from __future__ import annotations

import numpy as np

from liverfe.fit.comparators._packed import Array, Array32, Mask, Outcomes, packed
from liverfe.fit.compiled import compiled
from liverfe.fit.decay import FitOutcome

EQUAL, MEASURED, FITTED = range(3)
"""Weights: one for all; M², the inverse variance of ln M at high SNR; the square of the fit."""

_NOT_FITTED, _CONVERGED = int(FitOutcome.NOT_FITTED), int(FitOutcome.CONVERGED)
_NOT_CONVERGED = int(FitOutcome.NOT_CONVERGED)

_MOST_ROUNDS = 200
"""The weights follow the fit at most so often; 10 to 20 rounds are usual."""
_PLAIN_ROUNDS = 20
"""Then, where noise makes it creep towards its end or swing about it, Aitken's extrapolation of the
last three slopes takes every third step."""
_SETTLED = 1e-9
"""They have settled when ``R2* TE`` of the last echo moves by less than this."""


@compiled(error_model="numpy")
def _line(y: Array, t: Array, w: Array, used: int) -> tuple[float, float]:
    """Intercept at t = 0 and slope of the weighted line."""
    sw = st = sy = 0.0
    for e in range(used):
        sw += w[e]
        st += w[e] * t[e]
        sy += w[e] * y[e]
    mean_t, mean_y = st / sw, sy / sw
    stt = sty = 0.0
    for e in range(used):
        stt += w[e] * (t[e] - mean_t) ** 2
        sty += w[e] * (t[e] - mean_t) * (y[e] - mean_y)
    slope = sty / stt
    return mean_y - slope * mean_t, slope


@compiled(nogil=True, error_model="numpy")
def fit_lines(
    signal: Array32, times: Array, sigma: Array, usable: Mask, weights: int,
    rate_out: Array32, s0_out: Array32, outcome_out: Outcomes,
) -> None:  # fmt: skip
    """Fit ``ln M`` of each row; noise is not looked at. A zero has no logarithm: not fitted."""
    n_echoes = signal.shape[1]
    y, t, w = np.empty(n_echoes), np.empty(n_echoes), np.empty(n_echoes)
    for v in range(len(signal)):
        used = packed(signal, times, usable, v, 1.0, y, t)
        largest, positive = 0.0, used >= 2
        for e in range(used):
            positive = positive and y[e] > 0.0
            largest = max(largest, y[e])
        if not positive:
            outcome_out[v] = _NOT_FITTED
            continue
        for e in range(used):
            w[e] = (y[e] / largest) ** 2 if weights == MEASURED else 1.0
            y[e] = np.log(y[e])
        intercept, slope = _line(y, t, w, used)
        outcome_out[v] = _CONVERGED
        if weights == FITTED:
            outcome_out[v] = _NOT_CONVERGED
            older = slope
            for done in range(_MOST_ROUNDS):
                top = max(slope * t[0], slope * t[used - 1])
                for e in range(used):
                    w[e] = np.exp(2.0 * (slope * t[e] - top))
                before = slope
                intercept, slope = _line(y, t, w, used)
                if abs(slope - before) * t[used - 1] <= _SETTLED:
                    outcome_out[v] = _CONVERGED
                    break
                bend = slope - 2.0 * before + older
                if done > _PLAIN_ROUNDS and done % 3 == 0 and bend != 0.0:
                    slope = older - (before - older) ** 2 / bend
                older = before
        if outcome_out[v] == _CONVERGED:
            rate_out[v] = -1e3 * slope
            s0_out[v] = np.exp(intercept)
