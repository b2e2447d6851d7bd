"""The compiled loops of maximum likelihood in double precision, for any signal model.

Each voxel is worked out by itself, so results do not
depend on chunks or threads. The kernels release the interpreter lock; whoever calls them may use
plain threads (`liverfe.fit.blocks`).

Echo times are in ms here and R2* in 1/ms; amplitudes in units of sigma.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.fit.compiled import compiled
from liverfe.fit.likelihood_kernels import (
    Workspace,
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
def start(times: Array, m: Array, used: Used, n: int, p: Array) -> None:
    """Weighted log-linear fit of the leading echoes above the noise, noise power taken off.

    Where there are not two of them, as `start_fast`.
    """
    s_w = s_t = s_tt = s_y = s_ty = 0.0
    n_leading = 0
    for e in range(len(m)):
        if not used[e]:
            continue
        power = m[e] * m[e] - (2.0 * n - 1.0)
        if power < _USABLE * _USABLE:
            break
        y = 0.5 * np.log(power)
        s_w += power
        s_t += power * times[e]
        s_tt += power * times[e] * times[e]
        s_y += power * y
        s_ty += power * times[e] * y
        n_leading += 1
    if n_leading < 2:
        start_fast(times, m, used, n, p)
        return
    p[1] = max((s_t * s_y - s_w * s_ty) / (s_w * s_tt - s_t * s_t), 0.0)
    p[0] = (s_y + p[1] * s_t) / s_w


@inner
def start_fast(times: Array, m: Array, used: Used, n: int, p: Array) -> None:
    """The slowest decay that takes the second echo down to sigma, from the first one alone."""
    seen, first, t_first, t_second = 0, 1.0, 0.0, 1.0
    for e in range(len(m)):
        if used[e] and seen < 2:
            if seen == 0:
                first, t_first = np.sqrt(max(m[e] * m[e] - (2.0 * n - 1.0), 1.0)), times[e]
            t_second = times[e]
            seen += 1
    p[1] = max(np.log(first), 0.1) / (t_second - t_first)
    p[0] = np.log(first) + p[1] * t_first


@inner
def solve(work: Workspace, right: Array) -> bool:
    """Solve ``info step = right`` for the parameters not held; False where it cannot be solved."""
    n_p = len(right)
    info, factor, step, held = work.info, work.factor, work.step, work.held
    for k in range(n_p):
        for j in range(k + 1):
            value = info[k, j]
            if held[k] or held[j]:
                value = 1.0 if k == j else 0.0
            for i in range(j):
                value -= factor[k, i] * factor[j, i]
            if k != j:
                factor[k, j] = value / factor[j, j]
            elif value > 1e-14 * (1.0 if held[k] else info[k, k]):
                factor[k, k] = np.sqrt(value)
            else:
                return False
    for k in range(n_p):
        value = 0.0 if held[k] else right[k]
        for j in range(k):
            value -= factor[k, j] * step[j]
        step[k] = value / factor[k, k]
    for back in range(n_p):
        k = n_p - 1 - back
        value = step[k]
        for j in range(k + 1, n_p):
            value -= factor[j, k] * step[j]
        step[k] = value / factor[k, k]
    return True


@inner
def find_step(lower: Array, upper: Array, p: Array, n_free: int, work: Workspace) -> bool:
    """Fisher's step of the first `n_free` parameters; one on a bound that wants beyond is held."""
    n_p = len(p)
    for k in range(n_p):
        work.held[k] = k >= n_free
    for _ in range(n_p + 1):
        if not solve(work, work.score):
            return False
        again = False
        for k in range(n_p):
            beyond = (p[k] <= lower[k] and work.step[k] < 0.0) or (
                p[k] >= upper[k] and work.step[k] > 0.0
            )
            if beyond and not work.held[k]:
                work.held[k] = True
                again = True
        if not again:
            return True
    return False


@inner
def try_point(lower: Array, upper: Array, p: Array, share: float, work: Workspace) -> None:
    """The point a share of the step away; beyond a bound it stops there, all following along."""
    part = share
    for k in range(len(p)):
        if p[k] + part * work.step[k] < lower[k]:
            part = (lower[k] - p[k]) / work.step[k]
        elif p[k] + part * work.step[k] > upper[k]:
            part = (upper[k] - p[k]) / work.step[k]
    for k in range(len(p)):
        work.p_trial[k] = min(max(p[k] + part * work.step[k], lower[k]), upper[k])


@inner
def climb(
    model: SignalModel, m: Array, used: Used, noise: KernelTables, n_free: int, work: Workspace
) -> tuple[float, int]:
    """Fisher scoring with step halving from ``work.p`` on; returns log-likelihood and outcome.

    Parameters from number `n_free` on stay where they are.
    """
    p, lower, upper = work.p, model.lower, model.upper
    for k in range(len(p)):
        p[k] = min(max(p[k], lower[k]), upper[k])
    best = log_likelihood(model, m, used, p, noise, work.amplitudes)
    for _ in range(_MAX_STEPS):
        score_and_information(model, m, used, p, noise, work)
        if not find_step(lower, upper, p, n_free, work):
            return best, NOT_CONVERGED
        gain = 0.0
        for k in range(len(p)):
            gain += 0.5 * work.step[k] * work.score[k]
        share, moved = 1.0, False
        for _halving in range(_MAX_HALVINGS):
            try_point(lower, upper, p, share, work)
            value = log_likelihood(model, m, used, work.p_trial, noise, work.trial)
            if value > best or (gain < _TOO_SMALL_TO_SEE and np.isfinite(value)):
                copy(work.p_trial, p)
                copy(work.trial, work.amplitudes)
                best, moved = value, True
                break
            share *= 0.5
        if gain < _STOP or (not moved and gain < _NEARLY_NOTHING):
            if p[1] <= lower[1] + _NO_RATE:
                return best, AT_LOWER_BOUND
            if p[1] >= upper[1]:
                return best, AT_UPPER_BOUND
            return best, CONVERGED
        if not moved:
            return best, NOT_CONVERGED
    return best, NOT_CONVERGED


@inner
def climb_all(
    model: SignalModel, times: Array, m: Array, used: Used, noise: KernelTables, work: Workspace
) -> tuple[float, int]:
    """Climb from every start; the point of greatest likelihood is left in ``work.p_best``.

    First one exponential, the model's own parameters being nil: from the leading echoes, and from
    one echo alone in case that is a trap. From its maximum then each start of the own parameters.
    """
    n_p = len(work.p)
    best, outcome = -np.inf, NOT_CONVERGED
    n_own = len(model.starts) if n_p > 2 else 0
    for attempt in range(2 + n_own):
        own = attempt >= 2
        for k in range(2, n_p):
            work.p[k] = model.starts[attempt - 2, k - 2] if own else 0.0
        if attempt == 0:
            start(times, m, used, noise.n, work.p)
        elif attempt == 1:
            start_fast(times, m, used, noise.n, work.p)
        else:
            if attempt == 2:
                copy(work.p_best, work.p_simple)
                best = -np.inf
            work.p[0], work.p[1] = work.p_simple[0], work.p_simple[1]
        value, how = climb(model, m, used, noise, n_p if own else 2, work)
        if value > best + _BETTER and (attempt != 1 or how != NOT_CONVERGED):
            best, outcome = value, how
            copy(work.p, work.p_best)
    return best, outcome


@inner
def standard_errors(work: Workspace, se: Array) -> float:
    """Fill in standard errors from the inverse of the information; returns its log determinant."""
    n_p = len(work.p)
    for k in range(n_p):
        work.held[k] = False
    for k in range(n_p):
        for j in range(n_p):
            work.score[j] = 1.0 if j == k else 0.0
        if not solve(work, work.score):
            for j in range(n_p):
                se[j] = np.inf
            return -np.inf
        se[k] = np.sqrt(work.step[k])
    log_det = 0.0
    for k in range(n_p):
        log_det += 2.0 * np.log(work.factor[k, k])
    return log_det


@inner
def is_unresolved(rate: float, se: float, times: Array) -> bool:
    """Whether a decay is over between two echoes and its rate as uncertain as itself."""
    return rate * (times[1] - times[0]) > FAST and not se < UNRESOLVED * rate


@inner
def take_in(
    row: Array32, scale: float, usable: Used, m: Array, used: Used
) -> tuple[int, float, float]:
    """One voxel in units of sigma: usable echoes (-1 if one is no magnitude), power, first echo."""
    n_used, power, first, fine = 0, 0.0, 0.0, True
    for e in range(len(m)):
        used[e] = usable[e]
        m[e] = row[e] * scale
        if used[e]:
            if n_used == 0:
                first = m[e]
            n_used += 1
            power += m[e] * m[e]
            fine = fine and m[e] >= 0.0
    if not fine or not np.isfinite(power):
        return -1, power, first
    return n_used, power, first


@compiled(nogil=True, error_model="numpy", no_cfunc_wrapper=True)
def fit_voxels(
    model: SignalModel, signal: Array32, usable: Used, times: Array,
    sigma: Array, noise: KernelTables, no_signal_power: Array,
    no_signal_first: float, m: Array, used: Used, work: Workspace,
    p_out: Array, se_out: Array, likelihood_out: Array, log_det_out: Array, chi2_out: Array32,
    outcome_out: NDArray[np.uint8],
) -> None:  # fmt: skip
    """Fit each row of `signal`; see `liverfe.fit.engine` for what the arguments mean."""
    n_p = len(model.lower)
    for place in range(len(signal)):
        s = sigma[place % len(sigma)]
        n_used, power, first = take_in(signal[place], 1.0 / s, usable[place % len(usable)], m, used)
        if n_used < n_p:
            outcome_out[place] = NOT_FITTED
            continue
        if power < no_signal_power[n_used] and first < no_signal_first:
            outcome_out[place] = NO_SIGNAL
            continue
        best, outcome = climb_all(model, times, m, used, noise, work)
        best = log_likelihood(model, m, used, work.p_best, noise, work.amplitudes)
        score_and_information(model, m, used, work.p_best, noise, work)
        log_det_out[place] = standard_errors(work, se_out[place])
        if (outcome == CONVERGED or outcome == NOT_CONVERGED) and is_unresolved(  # noqa: SIM109
            work.p_best[1], se_out[place, 1], times
        ):
            outcome = AT_UPPER_BOUND
        outcome_out[place] = outcome
        copy(work.p_best, p_out[place])
        p_out[place, 0] += np.log(s)
        likelihood_out[place] = best + data_terms(m, used, s, noise.n)
        if n_used > n_p:
            chi2_out[place] = misfit(m, used, work.amplitudes, noise) / (n_used - n_p)
