"""Least squares of a decay by a search over R2* alone, the linear parameters projected out.

The search looks at a grid over all rates before it closes in, so no start can trap it. It serves
plain least squares, with an offset, truncated, and the second moment, whose model is again an
exponential: ``M² - 2 n sigma² = S0² exp(-2 R2* TE)``.

Echo times in ms, R2* in 1/ms.
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
    packed,
)
from liverfe.fit.compiled import compiled
from liverfe.fit.decay import FitOutcome
from liverfe.fit.rows import DecayRows
from liverfe.fit.signal_models import max_rate_per_ms

_NOT_FITTED, _CONVERGED = int(FitOutcome.NOT_FITTED), int(FitOutcome.CONVERGED)
_NO_SIGNAL = int(FitOutcome.NO_SIGNAL)
_AT_LOWER, _AT_UPPER = int(FitOutcome.AT_LOWER_BOUND), int(FitOutcome.AT_UPPER_BOUND)

_GRID = 48
_DECADES = 4.0
"""The grid: zero, and this many rates over this many decades below the bound, 21 % apart."""
_CLOSE = 1e-12
"""The search ends when R2* moves by less than this share of itself ..."""
_MOST_TRIALS = 100
"""... usually after eight trials."""
_KEPT_AT_LEAST = 3
"""Truncation keeps at least so many echoes."""


@compiled(error_model="numpy")
def _solve(y: Array, shape: Array, used: int, with_offset: bool, linear: Array) -> float:
    """Residual sum of squares of the best (S0, C), which it leaves in `linear`."""
    see = se = sye = sy = syy = 0.0
    for e in range(used):
        x = shape[e]
        see += x * x
        se += x
        sye += y[e] * x
        sy += y[e]
        syy += y[e] * y[e]
    if not see > 0.0:  # the decay has underflowed: nothing of it is left to fit
        return np.inf
    linear[0] = sye / see
    linear[1] = 0.0
    if with_offset:
        det = see * used - se * se
        if det <= 1e-12 * see * used:
            return np.inf
        offset = (see * sy - se * sye) / det
        if offset > 0.0:  # a noise floor cannot be negative
            linear[0] = (sye * used - sy * se) / det
            linear[1] = offset
    rest: float = syy - linear[0] * sye - linear[1] * sy
    return rest


@compiled(error_model="numpy")
def _rise(
    y: Array, t: Array, used: int, rate: float, with_offset: bool, shape: Array, linear: Array
) -> float:
    """Half the derivative of the residual sum of squares by the rate, (S0, C) being the best."""
    for e in range(used):
        shape[e] = np.exp(-rate * t[e])
    _solve(y, shape, used, with_offset, linear)
    total = 0.0
    for e in range(used):
        total += (y[e] - linear[0] * shape[e] - linear[1]) * t[e] * shape[e]
    rise: float = linear[0] * total
    return rise


@compiled(error_model="numpy")
def _search(
    y: Array, t: Array, used: int, grid: Array, shapes: Array, with_offset: bool,
    shape: Array, linear: Array,
) -> tuple[float, int]:  # fmt: skip
    """The best rate; and 0, or the end of the grid that it ran into: -1 or 1."""
    first, last = 1 if with_offset else 0, len(grid) - 1  # S0 and C are one without decay
    best, best_g = np.inf, last
    for g in range(first, last + 1):
        cost = _solve(y, shapes[g], used, with_offset, linear)
        if cost < best:
            best, best_g = cost, g
    low, high = grid[max(best_g - 1, first)], grid[min(best_g + 1, last)]
    at_low = _rise(y, t, used, low, with_offset, shape, linear)
    if best_g == first and not at_low < 0.0:
        return low, -1
    at_high = _rise(y, t, used, high, with_offset, shape, linear)
    if best_g == last and not at_high > 0.0:
        return high, 1
    # False position between a fall and a rise, an end that stays being halved (Illinois).
    rate, side = low, 0
    for _ in range(_MOST_TRIALS):
        before = rate
        if at_low < 0.0 < at_high:
            rate = (low * at_high - high * at_low) / (at_high - at_low)
        else:
            rate = 0.5 * (low + high)
        here = _rise(y, t, used, rate, with_offset, shape, linear)
        if abs(rate - before) <= _CLOSE * rate:
            break
        if here < 0.0:
            low, at_low = rate, here
            at_high *= 0.5 if side < 0 else 1.0
            side = -1
        else:
            high, at_high = rate, here
            at_low *= 0.5 if side > 0 else 1.0
            side = 1
    return rate, 0


@compiled(error_model="numpy")
def _leading(m: Array, used: int, threshold: float) -> int:
    """How many leading echoes stand above the threshold; at least three, or all there are."""
    count = 0
    while count < used and m[count] > threshold:
        count += 1
    return max(count, min(_KEPT_AT_LEAST, used))


@compiled(error_model="numpy")
def _lay_grid(t: Array, used: int, max_rate: float, grid: Array, shapes: Array) -> None:
    """Set the rates and the decay that each has over the echoes."""
    for g in range(len(grid)):
        grid[g] = max_rate * 10.0 ** (_DECADES * (g / _GRID - 1.0)) if g > 0 else 0.0
        for e in range(used):
            shapes[g, e] = np.exp(-grid[g] * t[e])


@compiled(nogil=True, error_model="numpy")
def fit_projected(
    signal: Array32, times: Array, sigma: Array, usable: Mask,
    with_offset: bool, kept_above: float, by_fit: bool, furthest: float,
    rate_out: Array32, s0_out: Array32, outcome_out: Outcomes,
) -> None:  # fmt: skip
    """Fit each row by least squares of M; noise is not looked at but for `kept_above`.

    That, in sigma, cuts off the echoes from the first that does not stand above it; 0 keeps all.
    With `by_fit` the fitted signal decides, not the noisy one: echoes go one by one from the end.
    R2* is bounded by ``furthest`` over the first usable echo time.
    """
    n_echoes = signal.shape[1]
    y, t, shape, linear = np.empty(n_echoes), np.empty(n_echoes), np.empty(n_echoes), np.empty(2)
    grid, shapes = np.empty(_GRID + 1), np.empty((_GRID + 1, n_echoes))
    laid_for_all = False
    for v in range(len(signal)):
        count = packed(signal, times, usable, v, 1.0, y, t)
        used = count
        threshold = kept_above * sigma[v % len(sigma)]
        if kept_above > 0.0 and not by_fit:
            used = _leading(y, used, threshold)
        if used < (3 if with_offset else 2):
            outcome_out[v] = _NOT_FITTED
            continue
        if count < n_echoes or not laid_for_all:
            _lay_grid(t, count, furthest / t[0], grid, shapes)
            laid_for_all = count == n_echoes
        rate, end = _search(y, t, used, grid, shapes, with_offset, shape, linear)
        while by_fit and used > _KEPT_AT_LEAST and not linear[0] * shape[used - 1] > threshold:
            used -= 1
            rate, end = _search(y, t, used, grid, shapes, with_offset, shape, linear)
        if end > 0 or not linear[0] > 0.0:
            outcome_out[v] = _AT_UPPER
            continue
        outcome_out[v] = _AT_LOWER if end < 0 else _CONVERGED
        rate_out[v] = 1e3 * rate
        s0_out[v] = linear[0]


@compiled(nogil=True, error_model="numpy")
def fit_second_moments(
    signal: Array32, times: Array, sigma: Array, usable: Mask,
    n: int, power_limits: Array, first_limit: float, furthest: float,
    rate_out: Array32, s0_out: Array32, outcome_out: Outcomes,
) -> None:  # fmt: skip
    """Fit each row by least squares of M² on ``S0² exp(-2 R2* TE) + 2 n sigma²``."""
    n_echoes = signal.shape[1]
    y, t, shape, linear = np.empty(n_echoes), np.empty(n_echoes), np.empty(n_echoes), np.empty(2)
    grid, shapes = np.empty(_GRID + 1), np.empty((_GRID + 1, n_echoes))
    laid_for_all = False
    for v in range(len(signal)):
        scale = sigma[v % len(sigma)]
        used = packed(signal, times, usable, v, scale, y, t)
        if used < 2 or not (scale > 0.0 and scale < np.inf):
            outcome_out[v] = _NOT_FITTED
            continue
        if is_noise(y, used, power_limits, first_limit):
            outcome_out[v] = _NO_SIGNAL
            continue
        for e in range(used):
            y[e] = y[e] * y[e] - 2.0 * n
            t[e] *= 2.0
        if used < n_echoes or not laid_for_all:
            _lay_grid(t, used, 2.0 * furthest / t[0], grid, shapes)
            laid_for_all = used == n_echoes
        rate, end = _search(y, t, used, grid, shapes, False, shape, linear)
        if end > 0 or not linear[0] > 0.0:
            outcome_out[v] = _AT_UPPER
            continue
        outcome_out[v] = _AT_LOWER if end < 0 else _CONVERGED
        rate_out[v] = 1e3 * rate
        s0_out[v] = np.sqrt(linear[0]) * scale


def projected_least_squares(
    signal: Array32,
    echo_times_ms: Array,
    sigma: Array,
    usable: Mask | None,
    *,
    with_offset: bool = False,
    kept_above: float = 0.0,
    by_fit: bool = False,
) -> DecayRows:
    """Fit each row; arguments as in `liverfe.fit.fit_rows` and in `fit_projected`."""
    furthest = max_rate_per_ms(echo_times_ms) * float(echo_times_ms[0])
    return fit_each(
        fit_projected, signal, echo_times_ms, sigma, usable,
        with_offset, kept_above, by_fit, furthest,
    )  # fmt: skip
