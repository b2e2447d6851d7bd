r"""``autoregressive``: the integral of a decay over its fall is T2* (Pei 2015, with its erratum).

Over three neighbouring echoes :math:`\int M\,dt = T_2^*\,(M_i - M_{i+2})`, the integral by
Simpson's rule. No logarithm, no start, no iteration, and no noise floor either.

Simpson's rule is not exact for exponentials, so even without noise the estimate is short:
`rate_without_noise_per_s` says by how much. It is not made good here: under this name a reader
expects the published estimator, and where the shortfall counts the noise floor costs more.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from liverfe.fit.comparators._packed import Array, Array32, Mask, Outcomes, fit_each, packed
from liverfe.fit.compiled import compiled
from liverfe.fit.decay import FitOutcome
from liverfe.fit.estimator import Estimator
from liverfe.fit.rows import DecayRows

_NOT_FITTED, _CONVERGED = int(FitOutcome.NOT_FITTED), int(FitOutcome.CONVERGED)
_NOT_CONVERGED = int(FitOutcome.NOT_CONVERGED)


@compiled(error_model="numpy")
def simpson_weights(first: float, second: float) -> tuple[float, float, float]:
    """Weights of three samples that are `first` and `second` apart: exact for parabolas.

    ``H/6 (2 - h1/h0, H²/(h0 h1), 2 - h0/h1)`` with H = h0 + h1; h/3 (1, 4, 1) where they are equal.
    """
    span = first + second
    return (
        span / 6.0 * (2.0 - second / first),
        span / 6.0 * (span * span / (first * second)),
        span / 6.0 * (2.0 - first / second),
    )


@compiled(nogil=True, error_model="numpy")
def _fit_autoregressive(
    signal: Array32, times: Array, sigma: Array, usable: Mask,
    rate_out: Array32, s0_out: Array32, outcome_out: Outcomes,
) -> None:  # fmt: skip
    n_echoes = signal.shape[1]
    m, t = np.empty(n_echoes), np.empty(n_echoes)
    for v in range(len(signal)):
        used = packed(signal, times, usable, v, 1.0, m, t)
        if used < 3:
            outcome_out[v] = _NOT_FITTED
            continue
        fall_part = area_part = 0.0
        for i in range(used - 2):
            w0, w1, w2 = simpson_weights(t[i + 1] - t[i], t[i + 2] - t[i + 1])
            area = w0 * m[i] + w1 * m[i + 1] + w2 * m[i + 2]
            fall = m[i] - m[i + 2]
            # Pei's estimate is sum(z area) / sum(z fall) with z = area + h/3 fall, which leaves the
            # last echo of the three out of z; of unequal spacing that takes its own weight.
            z = area + w2 * fall
            fall_part += z * fall
            area_part += z * area
        rate = fall_part / area_part
        if not np.isfinite(rate):
            outcome_out[v] = _NOT_CONVERGED
            continue
        # It gives no S0: the least-squares one at its rate.
        see = sme = 0.0
        for e in range(used):
            x = np.exp(-rate * (t[e] - t[0]))
            see += x * x
            sme += m[e] * x
        rate_out[v] = 1e3 * rate
        s0_out[v] = sme / see * np.exp(rate * t[0])
        outcome_out[v] = _CONVERGED


def rate_without_noise_per_s(r2star_per_s: ArrayLike, spacing_ms: float) -> NDArray[np.float64]:
    r"""R2* that the estimator reads from a decay without noise: less than the true one.

    :math:`\hat R = 3 \sinh x / (\Delta (\cosh x + 2))` with :math:`x = R \Delta`, whatever the
    number of echoes: 0.5 % short at x = 1, 5.6 % at 2, and never above :math:`3 / \Delta`.

    Parameters
    ----------
    r2star_per_s : array_like
        True R2* in 1/s.
    spacing_ms : float
        Spacing of the echoes in ms, the same between all.

    Returns
    -------
    ndarray of float64
        R2* as read, 1/s.
    """
    x = np.asarray(r2star_per_s, dtype=np.float64) * spacing_ms * 1e-3
    # tanh and 1 / cosh do not overflow where sinh and cosh would.
    return np.asarray(3e3 / spacing_ms * np.tanh(x) / (1.0 + 2.0 / np.cosh(np.minimum(x, 300.0))))


def _fit(
    signal: Array32, echo_times_ms: Array, sigma: Array, n: int, usable: Mask | None
) -> DecayRows:
    del n  # it does not look at the noise
    return fit_each(_fit_autoregressive, signal, echo_times_ms, sigma, usable)


ESTIMATOR = Estimator(
    key="autoregressive", fit=_fit, noise_handling="none", citations=("pei2015", "pei2015erratum")
)
