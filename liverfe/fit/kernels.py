"""The compiled loops of maximum likelihood in double precision, for any signal model.

Each voxel is worked out by itself, so results do not depend on chunks or threads. The kernels
release the interpreter lock; whoever calls them may use plain threads (`liverfe.fit.blocks`).

Echo times are in ms here and R2* in 1/ms; amplitudes in units of sigma.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.fit.compiled import compiled
from liverfe.fit.likelihood_kernels import (
    AMPLITUDES,
    HELD,
    INFO,
    P_BEST,
    P_SIMPLE,
    P_TRIAL,
    SCORE,
    STEP,
    TRIAL,
    USED,
    M,
    P,
    copy,
    data_terms,
    inner,
    log_likelihood,
    misfit,
    score_and_information,
)
from liverfe.fit.signal_models import SignalModel
from liverfe.fit.tables import KernelTables

Array = NDArray[np.float64]
Array32 = NDArray[np.float32]
Used = NDArray[np.bool_]

NOT_FITTED, CONVERGED, AT_LOWER_BOUND, AT_UPPER_BOUND, NOT_CONVERGED, NO_SIGNAL = range(6)

_MAX_STEPS = 200
_MAX_HALVINGS = 12
_TOO_SMALL_TO_SEE = 1e-7
"""Gains in log-likelihood below this drown in the error of the tables: such steps are taken without
being checked."""
_STOP = 1e-10
"""A step that can gain less than this is the last one: it is 1.4e-5 standard errors long."""
_USABLE = 2.0
"""Echoes start the fit while their noise-corrected amplitude is above this many sigma."""
UNRESOLVED, FAST = 1.0, 0.5
"""A decay whose standard error exceeds R2* itself and whose R2* times the echo spacing is above one
half is too fast to see."""
_NEARLY_NOTHING = 1e-5
"""A gain below this that no step brings is the rounding of the tables: the maximum is reached."""
_NO_RATE = 1e-9
"""A rate (1/ms) that is as good as zero: T2* of a million seconds."""
_BETTER = 1e-6
"""By how much a second start must be likelier to be believed."""


@inner
def start(times: Array, work: Array, n: int) -> None:
    """Weighted log-linear fit of the leading echoes above the noise, noise power taken off.

    Where there are not two of them, as `start_fast`.
    """
    s_w = s_t = s_tt = s_y = s_ty = 0.0
    n_leading, leads = 0, True
    for e in range(len(times)):
        power = work[M, e] * work[M, e] - (2.0 * n - 1.0)
        if work[USED, e] > 0.0 and leads:
            leads = power >= _USABLE * _USABLE
            if leads:
                y = 0.5 * np.log(power)
                s_w += power
                s_t += power * times[e]
                s_tt += power * times[e] * times[e]
                s_y += power * y
                s_ty += power * times[e] * y
                n_leading += 1
    if n_leading < 2:
        start_fast(times, work, n)
    else:
        work[P, 1] = max((s_t * s_y - s_w * s_ty) / (s_w * s_tt - s_t * s_t), 0.0)
        work[P, 0] = (s_y + work[P, 1] * s_t) / s_w


@inner
def start_fast(times: Array, work: Array, n: int) -> None:
    """The slowest decay that takes the second echo down to sigma, from the first one alone."""
    seen, first, t_first, t_second = 0, 1.0, 0.0, 1.0
    for e in range(len(times)):
        if work[USED, e] > 0.0 and seen < 2:
            if seen == 0:
                first = np.sqrt(max(work[M, e] * work[M, e] - (2.0 * n - 1.0), 1.0))
                t_first = times[e]
            t_second = times[e]
            seen += 1
    work[P, 1] = max(np.log(first), 0.1) / (t_second - t_first)
    work[P, 0] = np.log(first) + work[P, 1] * t_first


@inner
def solve(work: Array, n_p: int) -> bool:
    """Solve ``information x step = score`` for the parameters not held; False where it cannot."""
    factor = INFO + n_p
    for k in range(n_p):
        for j in range(k + 1):
            value = work[INFO + k, j]
            if work[HELD, k] + work[HELD, j] > 0.0:
                value = 1.0 if k == j else 0.0
            for i in range(j):
                value -= work[factor + k, i] * work[factor + j, i]
            if k != j:
                work[factor + k, j] = value / work[factor + j, j]
            elif value > 1e-14 * (1.0 if work[HELD, k] > 0.0 else work[INFO + k, k]):
                work[factor + k, k] = np.sqrt(value)
            else:
                return False
    for k in range(n_p):
        value = 0.0 if work[HELD, k] > 0.0 else work[SCORE, k]
        for j in range(k):
            value -= work[factor + k, j] * work[STEP, j]
        work[STEP, k] = value / work[factor + k, k]
    for back in range(n_p):
        k = n_p - 1 - back
        value = work[STEP, k]
        for j in range(k + 1, n_p):
            value -= work[factor + j, k] * work[STEP, j]
        work[STEP, k] = value / work[factor + k, k]
    return True


@inner
def find_step(lower: Array, upper: Array, n_free: int, work: Array) -> bool:
    """Fisher's step of the first `n_free` parameters; one on a bound that wants beyond is held."""
    n_p = len(lower)
    for k in range(n_p):
        work[HELD, k] = 1.0 if k >= n_free else 0.0
    for _ in range(n_p + 1):
        if not solve(work, n_p):
            return False
        again = False
        for k in range(n_p):
            beyond = (work[P, k] <= lower[k] and work[STEP, k] < 0.0) or (
                work[P, k] >= upper[k] and work[STEP, k] > 0.0
            )
            if beyond and work[HELD, k] == 0.0:
                work[HELD, k] = 1.0
                again = True
        if not again:
            return True
    return False


@inner
def try_point(lower: Array, upper: Array, share: float, work: Array) -> None:
    """The point a share of the step away; beyond a bound it stops there, all following along."""
    part = share
    for k in range(len(lower)):
        if work[P, k] + part * work[STEP, k] < lower[k]:
            part = (lower[k] - work[P, k]) / work[STEP, k]
        elif work[P, k] + part * work[STEP, k] > upper[k]:
            part = (upper[k] - work[P, k]) / work[STEP, k]
    for k in range(len(lower)):
        work[P_TRIAL, k] = min(max(work[P, k] + part * work[STEP, k], lower[k]), upper[k])


@inner
def climb(
    model: SignalModel, noise: KernelTables, n_echoes: int, n_free: int, work: Array
) -> tuple[float, int]:
    """Fisher scoring with step halving from row P on; returns log-likelihood and outcome.

    Parameters from number `n_free` on stay where they are.
    """
    lower, upper = model.lower, model.upper
    n_p = len(lower)
    for k in range(n_p):
        work[P, k] = min(max(work[P, k], lower[k]), upper[k])
    best = log_likelihood(model, noise, n_echoes, work, P, AMPLITUDES)
    outcome = NOT_CONVERGED
    for _ in range(_MAX_STEPS):
        score_and_information(model, noise, n_echoes, n_p, work, P)
        if not find_step(lower, upper, n_free, work):
            break
        gain = 0.0
        for k in range(n_p):
            gain += 0.5 * work[STEP, k] * work[SCORE, k]
        share, moved = 1.0, False
        for _halving in range(_MAX_HALVINGS):
            try_point(lower, upper, share, work)
            value = log_likelihood(model, noise, n_echoes, work, P_TRIAL, TRIAL)
            if value > best or (gain < _TOO_SMALL_TO_SEE and np.isfinite(value)):
                copy(work, P_TRIAL, P)
                copy(work, TRIAL, AMPLITUDES)
                best, moved = value, True
                break
            share *= 0.5
        if gain < _STOP or (not moved and gain < _NEARLY_NOTHING):
            outcome = CONVERGED
            break
        if not moved:
            break
    if outcome == CONVERGED and work[P, 1] <= lower[1] + _NO_RATE:
        outcome = AT_LOWER_BOUND
    elif outcome == CONVERGED and work[P, 1] >= upper[1]:
        outcome = AT_UPPER_BOUND
    return best, outcome


@inner
def climb_all(
    model: SignalModel, times: Array, noise: KernelTables, work: Array
) -> tuple[float, int]:
    """Climb from every start; the point of greatest likelihood is left in row P_BEST.

    First one exponential, the model's own parameters being nil: from the leading echoes, and from
    one echo alone in case that is a trap. From its maximum then each start of the own parameters.
    """
    n_p = len(model.lower)
    best, outcome = -np.inf, NOT_CONVERGED
    n_own = len(model.starts) if n_p > 2 else 0
    for attempt in range(2 + n_own):
        own = attempt >= 2
        for k in range(2, n_p):
            work[P, k] = model.starts[attempt - 2, k - 2] if own else 0.0
        if attempt == 0:
            start(times, work, noise.n)
        elif attempt == 1:
            start_fast(times, work, noise.n)
        else:
            if attempt == 2:
                copy(work, P_BEST, P_SIMPLE)
                best = -np.inf
            work[P, 0], work[P, 1] = work[P_SIMPLE, 0], work[P_SIMPLE, 1]
        value, how = climb(model, noise, len(times), n_p if own else 2, work)
        if value > best + _BETTER and (attempt != 1 or how != NOT_CONVERGED):
            best, outcome = value, how
            copy(work, P, P_BEST)
    return best, outcome


@inner
def standard_errors(work: Array, n_p: int, se: Array, place: int) -> float:
    """Fill in standard errors from the inverse of the information; returns its log determinant."""
    log_det = 0.0
    for k in range(n_p):
        work[HELD, k] = 0.0
    for k in range(n_p):
        for j in range(n_p):
            work[SCORE, j] = 1.0 if j == k else 0.0
        if not solve(work, n_p):
            for j in range(n_p):
                se[place, j] = np.inf
            return -np.inf
        se[place, k] = np.sqrt(work[STEP, k])
    for k in range(n_p):
        log_det += 2.0 * np.log(work[INFO + n_p + k, k])
    return log_det


@inner
def is_unresolved(rate: float, se: float, times: Array) -> bool:
    """Whether a decay is over between two echoes and its rate as uncertain as itself."""
    return rate * (times[1] - times[0]) > FAST and not se < UNRESOLVED * rate


@inner
def take_in(
    signal: Array32, usable: Used, place: int, scale: float, work: Array
) -> tuple[int, float, float]:
    """One voxel in units of sigma: usable echoes (-1 if one is no magnitude), power, first echo."""
    n_used, power, first, fine = 0, 0.0, 0.0, True
    for e in range(signal.shape[1]):
        m = signal[place, e] * scale
        work[M, e] = m
        work[USED, e] = 0.0
        if usable[place % len(usable), e]:
            work[USED, e] = 1.0
            first = m if n_used == 0 else first
            n_used += 1
            power += m * m
            fine = fine and m >= 0.0
    if not fine or not np.isfinite(power):
        n_used = -1
    return n_used, power, first


@compiled(nogil=True, error_model="numpy", no_cfunc_wrapper=True)
def fit_voxels(
    model: SignalModel, signal: Array32, usable: Used, times: Array, sigma: Array,
    noise: KernelTables, no_signal_power: Array, no_signal_first: float, work: Array,
    p_out: Array, se_out: Array, likelihood_out: Array, log_det_out: Array, chi2_out: Array32,
    outcome_out: NDArray[np.uint8],
) -> None:  # fmt: skip
    """Fit each row of `signal`; see `liverfe.fit.engine` for what the arguments mean."""
    n_p, n_echoes = len(model.lower), len(times)
    for place in range(len(signal)):
        s = sigma[place % len(sigma)]
        n_used, power, first = take_in(signal, usable, place, 1.0 / s, work)
        if n_used < n_p:
            outcome_out[place] = NOT_FITTED
            continue
        if power < no_signal_power[n_used] and first < no_signal_first:
            outcome_out[place] = NO_SIGNAL
            continue
        best, outcome = climb_all(model, times, noise, work)
        best = log_likelihood(model, noise, n_echoes, work, P_BEST, AMPLITUDES)
        score_and_information(model, noise, n_echoes, n_p, work, P_BEST)
        log_det_out[place] = standard_errors(work, n_p, se_out, place)
        if (outcome == CONVERGED or outcome == NOT_CONVERGED) and is_unresolved(  # noqa: SIM109
            work[P_BEST, 1], se_out[place, 1], times
        ):
            outcome = AT_UPPER_BOUND
        outcome_out[place] = outcome
        for k in range(n_p):
            p_out[place, k] = work[P_BEST, k]
        p_out[place, 0] += np.log(s)
        likelihood_out[place] = best + data_terms(work, n_echoes, s, noise.n)
        if n_used > n_p:
            chi2_out[place] = misfit(noise, n_echoes, work) / (n_used - n_p)
