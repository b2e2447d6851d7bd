"""Least squares of the magnitude on its expectation under noise: the compiled loop.

Every start is looked at: on a grid over all rates the amplitude comes from the second moment, which
is linear in it, and the descent sets out from each valley of that grid. Levenberg-Marquardt then
runs on (ln a, R2*), a being the amplitude at the first usable echo, which hardly hangs on R2*.

Echo times in ms, R2* in 1/ms; amplitudes in units of sigma.
"""

from __future__ import annotations

import numpy as np

from liverfe.fit.comparators._packed import (
    Array,
    Array32,
    Mask,
    Outcomes,
    fit_each,
    is_noise,
    look_up,
    packed,
)
from liverfe.fit.compiled import compiled
from liverfe.fit.decay import FitOutcome
from liverfe.fit.engine import no_signal_first, no_signal_powers
from liverfe.fit.rows import DecayRows
from liverfe.fit.signal_models import max_rate_per_ms
from liverfe.fit.tables import signal_tables

_NOT_FITTED, _CONVERGED = int(FitOutcome.NOT_FITTED), int(FitOutcome.CONVERGED)
_AT_LOWER, _AT_UPPER = int(FitOutcome.AT_LOWER_BOUND), int(FitOutcome.AT_UPPER_BOUND)
_NOT_CONVERGED, _NO_SIGNAL = int(FitOutcome.NOT_CONVERGED), int(FitOutcome.NO_SIGNAL)

_GRID = 24
_DECADES = 3.0
"""Starts: zero, and this many rates over this many decades below the upper bound."""
_LEAST_AMPLITUDE = 0.05
"""Amplitude at the first echo that a start has at least, in sigma: less has no slope to climb."""
_MOST_STEPS = 100
"""Six to fifteen are usual; a flat valley of a voxel near the noise takes more."""
_LONGEST = 2.0
"""Longest step of ln a."""
_STEP_IS_SMALL = 1e-6
"""A step ends the descent when ln a and ``R2* TE`` of the last echo move by less than this."""
_FLAT = 1e-6
"""Where no step leads down, the descent is at its end if the slope is below this share of what the
residuals could give: what double precision leaves of a minimum."""

_UNRESOLVED = 1.0
"""A fit that did not settle and whose standard error exceeds R2* itself decays too fast to see: on
that plain the sum of squares hardly falls towards the upper bound, and no step is the last."""


@compiled(error_model="numpy")
def _evaluate(
    m: Array, t: Array, used: int, w: Array, reweigh: bool, log_a: float, rate: float, n: int,
    excess: Array, scale: float, out: Array,
) -> float:  # fmt: skip
    """Weighted sum of squares; leaves the normal equations in (ln a, R2*) in `out`.

    ``out = [h00, h01, h11, g0, g1]``. With `reweigh` the weights become 1 / variance of the
    magnitude at this point first.
    """
    total = 0.0
    out[:] = 0.0
    for e in range(used):
        since = t[e] - t[0]
        a = np.exp(log_a - rate * since)
        d, by_u = look_up(excess, a / (a + scale))
        if reweigh:
            w[e] = 1.0 / (2.0 * n - d * d - 2.0 * a * d)
        j0 = a * (1.0 + by_u * scale / (a + scale) ** 2)
        j1 = -since * j0
        rest = m[e] - a - d
        total += w[e] * rest * rest
        out[0] += w[e] * j0 * j0
        out[1] += w[e] * j0 * j1
        out[2] += w[e] * j1 * j1
        out[3] += w[e] * j0 * rest
        out[4] += w[e] * j1 * rest
    return total


@compiled(error_model="numpy")
def _descend(
    m: Array, t: Array, used: int, w: Array, log_a: float, rate: float, max_rate: float,
    weighted: bool, n: int, excess: Array, scale: float, here: Array, there: Array,
) -> tuple[float, float, float, bool]:  # fmt: skip
    """Levenberg-Marquardt within 0 <= R2* <= max_rate; ln a, R2*, cost, and whether it settled."""
    cost = _evaluate(m, t, used, w, weighted, log_a, rate, n, excess, scale, here)
    span = t[used - 1] - t[0]
    damping = 1e-3
    for _ in range(_MOST_STEPS):
        h00, h01, h11, g0, g1 = here[0], here[1], here[2], here[3], here[4]
        # A rate on its bound that is pulled beyond it stays: then only the amplitude moves.
        pulled = g1 - h01 * g0 / h00
        held = (rate <= 0.0 and pulled <= 0.0) or (rate >= max_rate and pulled >= 0.0)
        d0, d1 = h00 * (1.0 + damping), h11 * (1.0 + damping)
        if held:
            step0, step1 = g0 / d0, 0.0
        else:
            det = d0 * d1 - h01 * h01
            step0, step1 = (d1 * g0 - h01 * g1) / det, (d0 * g1 - h01 * g0) / det
        if not (np.isfinite(step0) and np.isfinite(step1)):
            return log_a, rate, cost, False
        step0 = min(max(step0, -_LONGEST), _LONGEST)
        new_rate = min(max(rate + step1, 0.0), max_rate)
        new_cost = _evaluate(m, t, used, w, False, log_a + step0, new_rate, n, excess, scale, there)
        if new_cost <= cost:
            settled = abs(new_rate - rate) * span <= _STEP_IS_SMALL and abs(step0) <= _STEP_IS_SMALL
            gain = cost - new_cost
            log_a, rate, cost = log_a + step0, new_rate, new_cost
            # What the normal equations promised tells how far to trust them: where residuals bend
            # the valley, full steps swing from side to side.
            promised = 2.0 * (step0 * g0 + step1 * g1) - (
                h00 * step0 * step0 + 2.0 * h01 * step0 * step1 + h11 * step1 * step1
            )
            if gain > 0.75 * promised:
                damping = max(0.2 * damping, 1e-9)
            elif gain < 0.25 * promised:
                damping *= 4.0
            if weighted:
                cost = _evaluate(m, t, used, w, True, log_a, rate, n, excess, scale, here)
            else:
                here[:] = there
            if settled:
                return log_a, rate, cost, True
        else:
            damping *= 8.0
            if damping > 1e9:
                flat = abs(g0) <= _FLAT * np.sqrt(h00 * cost)
                flat = flat and (held or abs(g1) <= _FLAT * np.sqrt(h11 * cost))
                return log_a, rate, cost, flat
    return log_a, rate, cost, False


@compiled(error_model="numpy")
def _start_at(
    m: Array, used: int, shape: Array, n: int, excess: Array, scale: float
) -> tuple[float, float]:
    """Amplitude at the first echo from the second moment, and the sum of squares there.

    `shape` is the decay over the echoes, 1 at the first.
    """
    top = bottom = 0.0
    for e in range(used):
        power = shape[e] * shape[e]
        top += power * (m[e] * m[e] - 2.0 * n)
        bottom += power * power
    first = np.sqrt(max(top / bottom, _LEAST_AMPLITUDE**2))
    cost = 0.0
    for e in range(used):
        a = first * shape[e]
        d, _ = look_up(excess, a / (a + scale))
        cost += (m[e] - a - d) ** 2
    return first, cost


@compiled(error_model="numpy")
def _best_of_all_starts(
    m: Array, t: Array, used: int, w: Array, rates: Array, shapes: Array, n: int, excess: Array,
    scale: float, starts: Array, here: Array, there: Array,
) -> tuple[float, float, bool]:  # fmt: skip
    """The lowest minimum that is reached from the valleys of the grid."""
    last = len(rates) - 1
    for g in range(last + 1):
        starts[g, 0], starts[g, 1] = _start_at(m, used, shapes[g], n, excess, scale)
    best, best_log_a, best_rate, found = np.inf, 0.0, 0.0, False
    for g in range(last + 1):
        before = starts[g - 1, 1] if g > 0 else np.inf
        after = starts[g + 1, 1] if g < last else np.inf
        if starts[g, 1] <= before and starts[g, 1] < after:
            log_a, rate, cost, settled = _descend(
                m, t, used, w, np.log(starts[g, 0]), rates[g], rates[last], False, n, excess,
                scale, here, there,
            )  # fmt: skip
            if cost < best:
                best, best_log_a, best_rate, found = cost, log_a, rate, settled
    return best_log_a, best_rate, found


@compiled(error_model="numpy")
def _lay_grid(t: Array, used: int, max_rate: float, rates: Array, shapes: Array) -> None:
    """Set the rates of the starts and the decay that each has over the echoes."""
    for g in range(len(rates)):
        rates[g] = max_rate * 10.0 ** (_DECADES * (g / _GRID - 1.0)) if g > 0 else 0.0
        for e in range(used):
            shapes[g, e] = np.exp(-rates[g] * (t[e] - t[0]))


@compiled(nogil=True, error_model="numpy")
def fit_first_moments(
    signal: Array32, times: Array, sigma: Array, usable: Mask,
    weighted: bool, n: int, excess: Array, amplitude_scale: float,
    power_limits: Array, first_limit: float, furthest: float,
    rate_out: Array32, s0_out: Array32, outcome_out: Outcomes,
) -> None:  # fmt: skip
    """Fit each row; `weighted`: by the inverse variance of the magnitude at the fit.

    R2* is bounded by ``furthest`` over the first usable echo time.
    """
    n_echoes = signal.shape[1]
    m, t, w = np.empty(n_echoes), np.empty(n_echoes), np.empty(n_echoes)
    rates, shapes = np.empty(_GRID + 1), np.empty((_GRID + 1, n_echoes))
    starts, here, there = np.empty((_GRID + 1, 2)), np.empty(5), np.empty(5)
    laid_for_all = False
    for v in range(len(signal)):
        scale = sigma[v % len(sigma)]
        used = packed(signal, times, usable, v, scale, m, t)
        if used < 2 or not (scale > 0.0 and scale < np.inf):
            outcome_out[v] = _NOT_FITTED
            continue
        if is_noise(m, used, power_limits, first_limit):
            outcome_out[v] = _NO_SIGNAL
            continue
        if used < n_echoes or not laid_for_all:
            _lay_grid(t, used, furthest / t[0], rates, shapes)
            laid_for_all = used == n_echoes
        w[:] = 1.0
        log_a, rate, settled = _best_of_all_starts(
            m, t, used, w, rates, shapes, n, excess, amplitude_scale, starts, here, there
        )
        if weighted and settled:
            log_a, rate, _, settled = _descend(
                m, t, used, w, log_a, rate, rates[-1], True, n, excess, amplitude_scale,
                here, there,
            )  # fmt: skip
        if not settled:
            _evaluate(m, t, used, w, False, log_a, rate, n, excess, amplitude_scale, here)
            det = here[0] * here[2] - here[1] * here[1]
            resolved = here[0] < (_UNRESOLVED * rate) ** 2 * det
            outcome_out[v] = _NOT_CONVERGED if resolved else _AT_UPPER
        elif rate >= 0.999 * rates[-1]:
            outcome_out[v] = _AT_UPPER
        else:
            outcome_out[v] = _AT_LOWER if rate <= 0.0 else _CONVERGED
            rate_out[v] = 1e3 * rate
            s0_out[v] = np.exp(log_a + rate * t[0]) * scale


def first_moment_least_squares(
    signal: Array32,
    echo_times_ms: Array,
    sigma: Array,
    n: int,
    usable: Mask | None,
    *,
    weighted: bool,
) -> DecayRows:
    """Fit each row; arguments as in `liverfe.fit.fit_rows` and in `fit_first_moments`."""
    tables = signal_tables(n)
    furthest = max_rate_per_ms(echo_times_ms) * float(echo_times_ms[0])
    return fit_each(
        fit_first_moments, signal, echo_times_ms, sigma, usable,
        weighted, n, tables.excess, tables.amplitude_scale,
        no_signal_powers(len(echo_times_ms), n), no_signal_first(n), furthest,
    )  # fmt: skip
