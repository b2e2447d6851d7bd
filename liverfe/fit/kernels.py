"""The compiled loops: Rician (noncentral-chi) maximum likelihood, voxel by voxel.

No SciPy inside; the equations come in as tables (`liverfe.fit.tables`). Each voxel is worked out
by itself, so results do not depend on chunks or threads. The kernels release the interpreter lock;
whoever calls them may use plain threads (`liverfe.fit.blocks`).

Echo times are in ms here and R2* in 1/ms; amplitudes in units of sigma.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from numpy.typing import NDArray

Array = NDArray[np.float64]
Array32 = NDArray[np.float32]

NOT_FITTED, CONVERGED, AT_LOWER_BOUND, AT_UPPER_BOUND, NOT_CONVERGED, NO_SIGNAL = range(6)

_MAX_STEPS = 40
_MAX_HALVINGS = 12
_STOP = 1e-6
"""A step that can gain less than this in log-likelihood is taken and is the last one: it is 0.0014
standard errors long, and leaves about a tenth of that."""
_USABLE = 2.0
"""Echoes start the fit while their noise-corrected amplitude is above this many sigma."""
_UNRESOLVED = 1.0
"""A fit that did not settle and whose standard error exceeds R2* itself decays too fast to see."""


@njit(cache=True, inline="always")
def _look_up(table: Array, u: float) -> float:
    x = u * len(table)
    i = int(x)
    if i >= len(table):
        i = len(table) - 1
    t = x - i
    value: float = table[i, 0] + t * (table[i, 1] + t * (table[i, 2] + t * table[i, 3]))
    return value


@njit(cache=True)
def _log_likelihood(
    m: Array, times: Array, log_s0: float, rate: float, n: int, kernel: Array,
    product_scale: float, amplitudes: Array,
) -> float:  # fmt: skip
    """Log-likelihood up to terms in the data alone; leaves the amplitudes behind."""
    total = 0.0
    for e in range(len(times)):
        a = np.exp(log_s0 - rate * times[e])
        amplitudes[e] = a
        z = m[e] * a
        shape = _look_up(kernel, z / (z + product_scale))
        total += shape - (n - 0.5) * np.log(z + product_scale) - 0.5 * (a - m[e]) ** 2
    return total


@njit(cache=True)
def _start(m: Array, times: Array, n: int) -> tuple[float, float]:
    """Weighted log-linear fit of the leading echoes above the noise, noise power taken off."""
    s_w = s_t = s_tt = s_y = s_ty = 0.0
    used = 0
    first = 0.0
    for e in range(len(times)):
        power = m[e] * m[e] - (2.0 * n - 1.0)
        if e == 0:
            first = np.sqrt(max(power, 1.0))
        if power < _USABLE * _USABLE:
            break
        y = 0.5 * np.log(power)
        s_w += power
        s_t += power * times[e]
        s_tt += power * times[e] * times[e]
        s_y += power * y
        s_ty += power * times[e] * y
        used += 1
    if used < 2:
        # One echo above the noise: the slowest decay that takes the second one down to sigma.
        rate = max(np.log(first), 0.1) / (times[1] - times[0])
        return np.log(first) + rate * times[0], rate
    rate = (s_t * s_y - s_w * s_ty) / (s_w * s_tt - s_t * s_t)
    rate = max(rate, 0.0)
    return (s_y + rate * s_t) / s_w, rate


@njit(cache=True)
def _score_and_information(
    m: Array, times: Array, amplitudes: Array, ratio: Array, information: Array,
    product_scale: float, amplitude_scale: float, out: Array,
) -> None:  # fmt: skip
    """Score and Fisher information in (ln S0, R2*): out = [s0, s1, f00, f01, f11]."""
    out[:] = 0.0
    for e in range(len(times)):
        t = times[e]
        a = amplitudes[e]
        z = m[e] * a
        pull = a * (m[e] * _look_up(ratio, z / (z + product_scale)) - a)
        weight = a * a * _look_up(information, a / (a + amplitude_scale))
        out[0] += pull
        out[1] -= t * pull
        out[2] += weight
        out[3] -= t * weight
        out[4] += t * t * weight


@njit(cache=True)
def _chi2(m: Array, amplitudes: Array, n: int, excess: Array, amplitude_scale: float) -> float:
    total = 0.0
    for e in range(len(m)):
        a = amplitudes[e]
        d = _look_up(excess, a / (a + amplitude_scale))
        total += (m[e] - a - d) ** 2 / (2.0 * n - d * d - 2.0 * a * d)
    return total


@njit(cache=True)
def _climb(
    m: Array, times: Array, max_rate: float, n: int, ratio: Array, kernel: Array,
    information: Array, product_scale: float, amplitude_scale: float, amplitudes: Array,
    trial: Array, work: Array,
) -> tuple[float, float, int]:  # fmt: skip
    """Fisher scoring with step halving; returns ln S0, R2* and the outcome."""
    log_s0, rate = _start(m, times, n)
    rate = min(rate, max_rate)
    best = _log_likelihood(m, times, log_s0, rate, n, kernel, product_scale, amplitudes)
    for _ in range(_MAX_STEPS):
        _score_and_information(
            m, times, amplitudes, ratio, information, product_scale, amplitude_scale, work
        )
        s0, s1, f00, f01, f11 = work[0], work[1], work[2], work[3], work[4]
        if rate <= 0.0 and (f00 * s1 - f01 * s0) <= 0.0:
            # On the lower bound and pulled below it: only S0 may still move.
            step0, step1 = s0 / f00, 0.0
        elif rate >= max_rate and (f00 * s1 - f01 * s0) >= 0.0:
            step0, step1 = s0 / f00, 0.0
        else:
            det = f00 * f11 - f01 * f01
            if not det > 0.0:
                return log_s0, rate, NOT_CONVERGED
            step0 = (f11 * s0 - f01 * s1) / det
            step1 = (f00 * s1 - f01 * s0) / det
        gain = 0.5 * (step0 * s0 + step1 * s1)
        if gain < _STOP:
            log_s0 += step0
            rate = min(max(rate + step1, 0.0), max_rate)
            for e in range(len(times)):
                amplitudes[e] = np.exp(log_s0 - rate * times[e])
            if rate <= 0.0:
                return log_s0, rate, AT_LOWER_BOUND
            if rate >= max_rate:
                return log_s0, rate, AT_UPPER_BOUND
            return log_s0, rate, CONVERGED
        share = 1.0
        moved = False
        for _halving in range(_MAX_HALVINGS):
            # A step beyond a bound stops at it, S0 following along the same direction.
            part = share
            if rate + part * step1 < 0.0:
                part = rate / -step1 if step1 < 0.0 else 0.0
            elif rate + part * step1 > max_rate:
                part = (max_rate - rate) / step1
            new_log_s0 = log_s0 + part * step0
            new_rate = min(max(rate + part * step1, 0.0), max_rate)
            if part < share and part <= 1e-12:
                new_log_s0 = log_s0 + share * s0 / f00
            value = _log_likelihood(m, times, new_log_s0, new_rate, n, kernel, product_scale, trial)
            if value > best:
                log_s0, rate, best, moved = new_log_s0, new_rate, value, True
                amplitudes[:] = trial
                if rate < 1e-12:
                    rate = 0.0
                break
            share *= 0.5
        if not moved:
            # No step uphill is left that double precision can see.
            if gain < 1e-5:
                return log_s0, rate, CONVERGED
            return log_s0, rate, NOT_CONVERGED
    return log_s0, rate, NOT_CONVERGED


@njit(cache=True, nogil=True, error_model="numpy")
def fit_maximum_likelihood(
    signal: Array32, times: Array, sigma: Array, n: int, max_rate: float,
    no_signal_power: float, no_signal_first: float,
    ratio: Array, kernel: Array, excess: Array, information: Array,
    product_scale: float, amplitude_scale: float,
    rate_out: Array32, s0_out: Array32, se_out: Array32, chi2_out: Array32,
    outcome_out: NDArray[np.uint8],
) -> None:  # fmt: skip
    """Fit each row of `signal`; see `liverfe.fit.rician` for what the arguments mean."""
    n_voxels, n_echoes = signal.shape
    m, amplitudes, trial = np.empty(n_echoes), np.empty(n_echoes), np.empty(n_echoes)
    work = np.empty(5)
    for v in range(n_voxels):
        scale = 1.0 / sigma[v % len(sigma)]
        power = 0.0
        usable = True
        for e in range(n_echoes):
            m[e] = signal[v, e] * scale
            power += m[e] * m[e]
            if not m[e] >= 0.0:
                usable = False
        if not usable or not np.isfinite(power):
            outcome_out[v] = NOT_FITTED
            continue
        if power < no_signal_power and m[0] < no_signal_first:
            outcome_out[v] = NO_SIGNAL
            continue
        log_s0, rate, outcome = _climb(
            m, times, max_rate, n, ratio, kernel, information, product_scale, amplitude_scale,
            amplitudes, trial, work,
        )  # fmt: skip
        _score_and_information(
            m, times, amplitudes, ratio, information, product_scale, amplitude_scale, work
        )
        det = work[2] * work[4] - work[3] * work[3]
        se = np.sqrt(work[2] / det) if det > 0.0 else np.inf
        if outcome == NOT_CONVERGED and not se < _UNRESOLVED * rate:
            outcome = AT_UPPER_BOUND
        outcome_out[v] = outcome
        if outcome == CONVERGED or outcome == AT_LOWER_BOUND:  # noqa: SIM109 - compiled
            rate_out[v] = rate * 1000.0
            s0_out[v] = np.exp(log_s0) / scale
            se_out[v] = se * 1000.0
            if n_echoes > 2:
                misfit = _chi2(m, amplitudes, n, excess, amplitude_scale)
                chi2_out[v] = misfit / (n_echoes - 2)
