"""The compiled loops of the least-squares estimators.

Two kinds: a one-dimensional search over R2* with the linear parameters projected out (mono-
exponential, truncated, with offset), and Levenberg-Marquardt on (ln S0, R2*) for the two moment
models. Echo times in ms, R2* in 1/ms.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

from liverfe.fit.kernels import AT_LOWER_BOUND, AT_UPPER_BOUND, CONVERGED, NOT_CONVERGED, NOT_FITTED

Array = NDArray[np.float64]
Array32 = NDArray[np.float32]

_GRID = 48
_GOLDEN = 0.6180339887498949
_MAX_STEPS = 60


@njit(cache=True)
def _projected(
    m: Array, times: Array, used: int, rate: float, with_offset: bool, linear: Array
) -> float:
    """Residual sum of squares at `rate`, S0 (and offset) being the best; fills `linear`."""
    see = se = sme = sm = smm = 0.0
    for e in range(used):
        x = np.exp(-rate * times[e])
        see += x * x
        se += x
        sme += m[e] * x
        sm += m[e]
        smm += m[e] * m[e]
    if with_offset:
        det = see * used - se * se
        if det <= 1e-12 * see * used:
            return np.inf
        linear[0] = (sme * used - sm * se) / det
        linear[1] = (see * sm - se * sme) / det
        if linear[1] < 0.0:  # a noise floor cannot be negative
            linear[0] = sme / see
            linear[1] = 0.0
        rest: float = smm - linear[0] * sme - linear[1] * sm
        return rest
    linear[0] = sme / see
    linear[1] = 0.0
    plain: float = smm - linear[0] * sme
    return plain


@njit(cache=True, nogil=True, error_model="numpy")
def fit_projected(
    signal: Array32, times: Array, used: NDArray[np.int64], max_rate: float, with_offset: bool,
    rate_out: Array32, s0_out: Array32, outcome_out: NDArray[np.uint8],
) -> None:  # fmt: skip
    """Least squares of ``S0 exp(-R t) (+ C)`` on the first `used` echoes of each row."""
    n_voxels, n_echoes = signal.shape
    m = np.empty(n_echoes)
    linear = np.empty(2)
    grid = np.empty(_GRID + 1)
    grid[0] = 0.0
    for g in range(_GRID):
        grid[g + 1] = max_rate * 10.0 ** (-4.0 * (1.0 - (g + 1.0) / _GRID))
    first = 1 if with_offset else 0
    for v in range(n_voxels):
        usable = used[v] >= 2 + first
        for e in range(n_echoes):
            m[e] = signal[v, e]
            usable = usable and np.isfinite(m[e])
        if not usable:
            outcome_out[v] = NOT_FITTED
            continue
        best, best_g = np.inf, first
        for g in range(first, _GRID + 1):
            cost = _projected(m, times, used[v], grid[g], with_offset, linear)
            if cost < best:
                best, best_g = cost, g
        low, high = grid[max(best_g - 1, first)], grid[min(best_g + 1, _GRID)]
        a = high - _GOLDEN * (high - low)
        b = low + _GOLDEN * (high - low)
        fa = _projected(m, times, used[v], a, with_offset, linear)
        fb = _projected(m, times, used[v], b, with_offset, linear)
        while high - low > 1e-7 * high + 1e-12:
            if fa < fb:
                high, b, fb = b, a, fa
                a = high - _GOLDEN * (high - low)
                fa = _projected(m, times, used[v], a, with_offset, linear)
            else:
                low, a, fa = a, b, fb
                b = low + _GOLDEN * (high - low)
                fb = _projected(m, times, used[v], b, with_offset, linear)
        rate = 0.5 * (low + high)
        _projected(m, times, used[v], rate, with_offset, linear)
        outcome_out[v] = CONVERGED
        if rate > 0.999 * max_rate or not linear[0] > 0.0:
            outcome_out[v] = AT_UPPER_BOUND
        else:
            if rate < 1e-6 * max_rate:
                outcome_out[v] = AT_LOWER_BOUND
            rate_out[v] = 1e3 * rate
            s0_out[v] = linear[0]


@njit(cache=True)
def _moment(
    a: float, order: int, n: int, excess: Array, amplitude_scale: float
) -> tuple[float, float]:
    """Expected first or second moment at amplitude `a`, and its derivative; sigma = 1."""
    if order == 2:
        return a * a + 2.0 * n, 2.0 * a
    u = a / (a + amplitude_scale)
    x = u * len(excess)
    i = min(int(x), len(excess) - 1)
    t = x - i
    d = excess[i, 0] + t * (excess[i, 1] + t * (excess[i, 2] + t * excess[i, 3]))
    by_u = (excess[i, 1] + t * (2.0 * excess[i, 2] + 3.0 * t * excess[i, 3])) * len(excess)
    return a + d, 1.0 + by_u * amplitude_scale / (a + amplitude_scale) ** 2


@njit(cache=True)
def _moment_cost(
    y: Array, times: Array, log_s0: float, rate: float, order: int, n: int, excess: Array,
    amplitude_scale: float,
) -> float:  # fmt: skip
    cost = 0.0
    for e in range(len(times)):
        mean, _ = _moment(np.exp(log_s0 - rate * times[e]), order, n, excess, amplitude_scale)
        cost += (y[e] - mean) ** 2
    return cost


@njit(cache=True, nogil=True, error_model="numpy")
def fit_moments(
    signal: Array32, times: Array, sigma: float, n: int, order: int, max_rate: float,
    start_rate: Array32, start_s0: Array32, excess: Array, amplitude_scale: float,
    rate_out: Array32, s0_out: Array32, outcome_out: NDArray[np.uint8],
) -> None:  # fmt: skip
    """Least squares of M (order 1) or M² (order 2) on its expectation."""
    n_voxels, n_echoes = signal.shape
    y = np.empty(n_echoes)
    for v in range(n_voxels):
        usable = np.isfinite(start_rate[v])
        for e in range(n_echoes):
            y[e] = (signal[v, e] / sigma) ** order
            usable = usable and np.isfinite(y[e])
        if not usable:
            outcome_out[v] = NOT_FITTED
            continue
        rate = min(max(1e-3 * start_rate[v], 1e-6), max_rate)
        log_s0 = np.log(max(start_s0[v] / sigma, 1e-3))
        cost = _moment_cost(y, times, log_s0, rate, order, n, excess, amplitude_scale)
        damping = 1e-3
        outcome_out[v] = NOT_CONVERGED
        for _ in range(_MAX_STEPS):
            h00 = h01 = h11 = g0 = g1 = 0.0
            for e in range(n_echoes):
                a = np.exp(log_s0 - rate * times[e])
                mean, slope = _moment(a, order, n, excess, amplitude_scale)
                j0 = slope * a
                j1 = -times[e] * j0
                h00 += j0 * j0
                h01 += j0 * j1
                h11 += j1 * j1
                g0 += j0 * (y[e] - mean)
                g1 += j1 * (y[e] - mean)
            d0, d1 = h00 * (1.0 + damping), h11 * (1.0 + damping)
            det = d0 * d1 - h01 * h01
            step0 = (d1 * g0 - h01 * g1) / det
            step1 = (d0 * g1 - h01 * g0) / det
            new_rate = min(max(rate + step1, 0.0), max_rate)
            new_cost = _moment_cost(
                y, times, log_s0 + step0, new_rate, order, n, excess, amplitude_scale
            )
            if new_cost <= cost:
                settled = abs(new_rate - rate) <= 1e-7 * (rate + 1e-6) and abs(step0) < 1e-7
                log_s0, rate, cost = log_s0 + step0, new_rate, new_cost
                damping = max(damping * 0.2, 1e-9)
                if settled:
                    outcome_out[v] = CONVERGED
                    break
            else:
                damping *= 8.0
                if damping > 1e9:
                    outcome_out[v] = CONVERGED
                    break
        if rate <= 0.0:
            outcome_out[v] = AT_LOWER_BOUND
        if rate >= 0.999 * max_rate:
            outcome_out[v] = AT_UPPER_BOUND
        elif outcome_out[v] != NOT_CONVERGED:
            rate_out[v] = 1e3 * rate
            s0_out[v] = np.exp(log_s0) * sigma
