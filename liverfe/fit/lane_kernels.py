"""The compiled loop of mono-exponential maximum likelihood, sixteen voxels at a time.

Newton's method on the exact log-likelihood in single precision, from a weighted log-linear start.
A voxel leaves its lane as settled only where everything went as it should: real signal, of a
brightness that single precision resolves, a true maximum, or a bound that it wants to cross. All
others are named in the outcome and go to the engine in double precision (`liverfe.fit.kernels`),
whose result is the same within a thousandth of a standard error where both apply (tests).

Echo times are in ms and R2* in 1/ms; amplitudes in units of sigma. S0 is carried as the logarithm
of the amplitude at the first echo, which decay correlates with least.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from liverfe.fit.compiled import compiled
from liverfe.fit.kernels import (
    AT_LOWER_BOUND,
    AT_UPPER_BOUND,
    CONVERGED,
    FAST,
    NO_SIGNAL,
    NOT_FITTED,
    UNRESOLVED,
)
from liverfe.fit.lane_functions import (
    amplitude_at,
    exp,
    fifth_degree,
    fourth_degree,
    rough_log,
    sixth_degree,
)
from liverfe.fit.lanes import (
    WIDTH,
    any_above,
    everywhere,
    fused,
    inner_lanes,
    larger,
    load,
    negative,
    root,
    smaller,
    store,
    turn,
    where_above,
)

Array = NDArray[np.float64]
Array32 = NDArray[np.float32]

UNSETTLED, LEFT_TO_ENGINE = 254, 255

FIRST_STEPS, MORE_STEPS = 3, 14
"""Newton steps of all voxels; and of those few that had not settled by then, side by side again:
else every sixteen would wait for their slowest."""
_STOP = 1e-4
"""A Newton step that can gain less than this in log-likelihood is taken and is the last one: it is
0.014 standard errors long, and leaves about the square of that."""
_USABLE_POWER = 4.0
"""Echoes start the fit while their noise-corrected power is above this many sigma²."""
_LONGEST_STEP = 2.0
"""In ln S0: a longer step comes from a bad start, and the engine shall have it."""
_BRIGHTEST = 500.0
"""Magnitude in sigma up to which single precision knows a decay to a ten-thousandth of its standard
error."""
_BETWEEN = 1e-6
"""Rate in 1/ms from which on a decay is one; slower ones are at the lower bound."""
_BACK = -0.3
"""Share of the rate by which it falls where it is too high and the curvature tells nothing; where
it is too low it doubles."""
_FLAT, _STOP_FLAT = 0.1, 1e-8
"""Where the variance of R2* is above this share of R2* squared, and R2* times the echo spacing
above one half, the likelihood is so flat that a small gain does not mean a short step."""


class LaneNoise(NamedTuple):
    """The noise equations as the lanes take them (`liverfe.fit.rationals`), and what is no signal.

    Attributes
    ----------
    n : int
        Effective number of channels.
    shortfall, excess, information : ndarray of float32, shape (2, D + 1)
        Quotients, see `SignalRationals`.
    least_power, least_first : float
        Summed power and first echo (sigma², sigma) below which a voxel has no signal.
    """

    n: int
    shortfall: Array32
    excess: Array32
    information: Array32
    least_power: float
    least_first: float


@inner_lanes
def _take_in(signal: Array32, sigma: Array, first_row: int, m: Array32, scales: Array32) -> None:
    """Sixteen rows in units of sigma, echo by echo; the last row of all fills up the lanes."""
    n_voxels, n_echoes = signal.shape
    for lane in range(WIDTH):
        v = min(first_row + lane, n_voxels - 1)
        scales[lane] = 1.0 / (sigma[v] if len(sigma) > 1 else sigma[0])
    if n_echoes <= WIDTH and (first_row + WIDTH) * n_echoes + WIDTH <= signal.size:
        turn(signal, first_row * n_echoes, n_echoes, n_echoes, m)
    else:
        for lane in range(WIDTH):
            for e in range(n_echoes):
                m[e * WIDTH + lane] = signal[min(first_row + lane, n_voxels - 1), e]
    scale = load(scales, 0)
    for e in range(n_echoes):
        store(m, e * WIDTH, load(m, e * WIDTH) * scale)


@inner_lanes
def _start(m_all: Array32, times: Array32, noise: LaneNoise) -> Any:
    """Where the fit starts, and which lanes are magnitudes, have signal, and can be fitted here.

    As `liverfe.fit.kernels.start`: a line through the leading echoes above the noise, weighted by
    power, or a guess from the first echo where there is but one.
    """
    zero, one, half = everywhere(0.0), everywhere(1.0), everywhere(0.5)
    floor, usable_power = everywhere(2.0 * noise.n - 1.0), everywhere(_USABLE_POWER)
    valid, dim, power, leading = one, one, zero, one
    s_w, s_t, s_tt, s_y, s_ty, used = zero, zero, zero, zero, zero, zero
    for e in range(len(times)):
        m = load(m_all, e * WIDTH)
        t = everywhere(times[e] - times[0])
        valid = where_above(m, everywhere(-1e-30), valid, zero)
        dim = where_above(everywhere(_BRIGHTEST), m, dim, zero)
        power = fused(m, m, power)
        w = fused(m, m, zero - floor)
        leading = where_above(w, usable_power, leading, zero)
        y = half * rough_log(larger(w, usable_power))
        w = w * leading
        used = used + leading
        s_w = s_w + w
        wt = w * t
        s_t = s_t + wt
        s_tt = fused(wt, t, s_tt)
        s_y = fused(w, y, s_y)
        s_ty = fused(wt, y, s_ty)
    valid = where_above(everywhere(3e38), power, valid, zero)
    first = load(m_all, 0)
    silent = where_above(
        everywhere(noise.least_power), power,
        where_above(everywhere(noise.least_first), first, one, zero), zero,
    )  # fmt: skip
    log_first = half * rough_log(larger(fused(first, first, zero - floor), one))
    guess = larger(log_first, everywhere(0.1)) / everywhere(times[1] - times[0])
    rate = larger((s_t * s_y - s_w * s_ty) / (s_w * s_tt - s_t * s_t), zero)
    enough = everywhere(1.5)
    log_a = where_above(used, enough, fused(rate, s_t, s_y) / s_w, log_first)
    rate = where_above(used, enough, rate, guess)
    return log_a, rate, valid, silent, valid * dim * (one - silent)


@inner_lanes
def _newton_sums(
    m_all: Array32, times: Array32, is_even: bool, noise: LaneNoise, log_a: Any, rate: Any
) -> Any:
    """Gradient of the log-likelihood and minus its second derivatives."""
    zero, two = everywhere(0.0), everywhere(2.0)
    more_channels = everywhere(2.0 * noise.n - 2.0)
    g0, g1, h00, h01, h11, a = zero, zero, zero, zero, zero, zero
    factor = exp(zero - rate * everywhere(times[1] - times[0]))
    for e in range(len(times)):
        m = load(m_all, e * WIDTH)
        t = everywhere(times[e] - times[0])
        a = amplitude_at(e, times, is_even, log_a, rate, a, factor)
        z = m * a
        w = sixth_degree(noise.shortfall[0], z) / sixth_degree(noise.shortfall[1], z)
        pull = fused(a, m - a, negative(w))
        # Minus the second derivative by ln a, from the recurrence of the Bessel functions.
        h = fused(two * a, a, w * fused(negative(two), z, w))
        if noise.n > 1:
            h = fused(more_channels, z - w, h)
        g0 = g0 + pull
        g1 = fused(t, pull, g1)
        h00 = h00 + h
        ht = h * t
        h01 = h01 + ht
        h11 = fused(ht, t, h11)
    return g0, negative(g1), h00, negative(h01), h11


@inner_lanes
def _climb(
    m_all: Array32, times: Array32, is_even: bool, noise: LaneNoise, max_rate: float,
    most_steps: int, log_a: Any, rate: Any, moving: Any,
) -> Any:  # fmt: skip
    """Newton steps of lanes that move; returns where they end, and who settled or moves still."""
    zero, one, half = everywhere(0.0), everywhere(1.0), everywhere(0.5)
    tiny, longest = everywhere(1e-30), everywhere(_LONGEST_STEP)
    stop, stop_flat, fastest = everywhere(_STOP), everywhere(_STOP_FLAT), everywhere(max_rate)
    rate = smaller(rate, fastest)
    settled = zero
    for _ in range(most_steps):
        g0, g1, h00, h01, h11 = _newton_sums(m_all, times, is_even, noise, log_a, rate)
        det = h00 * h11 - h01 * h01
        inverse = one / det
        step0 = (h11 * g0 - h01 * g1) * inverse
        step1 = (h00 * g1 - h01 * g0) * inverse
        # On a bound, and the best rate for each S0 lies beyond it: only S0 moves.
        beyond = h00 * g1 - h01 * g0
        held = where_above(zero, beyond, where_above(rate, zero, zero, one), zero)
        held = where_above(beyond, zero, where_above(fastest, rate, held, one), held)
        # Where the likelihood is not curved like a hill: uphill by a share of the rate.
        uphill = where_above(beyond, zero, rate, everywhere(_BACK) * rate)
        curved = where_above(det, tiny, one, zero)
        step1 = where_above(held, half, zero, where_above(curved, half, step1, uphill))
        step0 = where_above(curved - held, half, step0, g0 / h00)
        sound = where_above(h00, tiny, moving, zero)
        gain = half * fused(step0, g0, step1 * g1)
        length = larger(step0, zero - step0)
        moving = where_above(longest, length, sound, zero)
        # A step that would cross a bound ends on it, S0 following along the same direction.
        aim = rate + step1
        bounded = smaller(larger(aim, zero), fastest)
        off = larger(aim - bounded, bounded - aim)
        share = where_above(off, zero, (bounded - rate) / step1, one)
        rate = where_above(moving, half, bounded, rate)
        log_a = where_above(moving, half, fused(share, step0, log_a), log_a)
        # A flat likelihood gains little by long steps: those decays must come closer.
        flat = everywhere(_FLAT) * rate * rate * det
        fast = rate * everywhere(times[1] - times[0])
        strict = where_above(h00, flat, where_above(fast, half, stop_flat, stop), stop)
        done = where_above(
            off, zero, zero, where_above(strict, gain, moving * larger(curved, held), zero)
        )
        settled = settled + done
        moving = moving - done
        if not any_above(moving, half):
            break
    return log_a, rate, settled, moving


@inner_lanes
def _judge(
    m_all: Array32, times: Array32, is_even: bool, noise: LaneNoise, log_a: Any, rate: Any
) -> Any:
    """Standard error and misfit at the end, by the expected magnitude and its information."""
    zero, two, two_n = everywhere(0.0), everywhere(2.0), everywhere(2.0 * noise.n)
    f00, f01, f11, chi2, a = zero, zero, zero, zero, zero
    factor = exp(zero - rate * everywhere(times[1] - times[0]))
    for e in range(len(times)):
        m = load(m_all, e * WIDTH)
        t = everywhere(times[e] - times[0])
        a = amplitude_at(e, times, is_even, log_a, rate, a, factor)
        a2 = a * a
        share = fourth_degree(noise.information[0], a2) / fourth_degree(noise.information[1], a2)
        weight = a2 * share
        f00 = f00 + weight
        wt = weight * t
        f01 = f01 + wt
        f11 = fused(wt, t, f11)
        # With the excess d = p / q: (m - a - d)² / (2n - d (2a + d)), by one division.
        p, q = fifth_degree(noise.excess[0], a), fifth_degree(noise.excess[1], a)
        off = fused(m - a, q, negative(p))
        spread = fused(two_n * q, q, negative(p) * fused(two * a, q, p))
        chi2 = chi2 + off * off / spread
    det = f00 * f11 - f01 * f01
    return root(f00 / larger(det, everywhere(1e-30))), chi2


@inner_lanes
def _write(
    ends: Array32, times: Array32, max_rate: float, log_a: Any, rate: Any, settled: Any,
    moving: Any, silent: Any, valid: Any, errors: Any, chi2: Any,
) -> None:  # fmt: skip
    """Rows of `ends`: R2* in 1/s, S0 in sigma, standard error in 1/s, misfit, outcome.

    Of a voxel that still moves: the rate in 1/ms, and ln A in place of the standard error.
    """
    zero, half, nothing = everywhere(0.0), everywhere(0.5), everywhere(np.nan)
    too_fast = everywhere(AT_UPPER_BOUND)
    fast = rate * everywhere(times[1] - times[0])
    vague = where_above(errors, everywhere(UNRESOLVED) * rate, fast, zero)
    outcome = where_above(
        rate, everywhere(_BETWEEN), everywhere(CONVERGED), everywhere(AT_LOWER_BOUND)
    )
    outcome = where_above(vague, everywhere(FAST), too_fast, outcome)
    outcome = where_above(everywhere(max_rate), rate, outcome, too_fast)
    shown = where_above(too_fast, outcome, settled, zero)
    unfinished = where_above(moving, half, everywhere(UNSETTLED), everywhere(LEFT_TO_ENGINE))
    outcome = where_above(settled, half, outcome, unfinished)
    outcome = where_above(silent, half, everywhere(NO_SIGNAL), outcome)
    outcome = where_above(valid, half, outcome, everywhere(NOT_FITTED))
    per_s, dof = everywhere(1e3), everywhere(len(times) - 2.0)
    misfit = where_above(dof, half, chi2 / dof, nothing)
    s0 = exp(fused(rate, everywhere(times[0]), log_a))
    store(ends, 0, where_above(shown, half, per_s * rate, where_above(moving, half, rate, nothing)))
    store(ends, WIDTH, where_above(shown, half, s0, nothing))
    kept = where_above(moving, half, log_a, nothing)
    store(ends, 2 * WIDTH, where_above(shown, half, per_s * errors, kept))
    store(ends, 3 * WIDTH, where_above(shown, half, misfit, nothing))
    store(ends, 4 * WIDTH, outcome)


@compiled(nogil=True, error_model="numpy", no_cfunc_wrapper=True)
def fit_in_lanes(
    signal: Array32, times: Array32, is_even: bool, sigma: Array, noise: LaneNoise,
    max_rate: float, again: bool, m_all: Array32, ends: Array32, rate_out: Array32, s0_out: Array32,
    se_out: Array32, chi2_out: Array32, outcome_out: NDArray[np.uint8],
) -> None:  # fmt: skip
    """Fit each row of `signal`, or go on where it stood (`again`); every output row is written.

    A row that has not settled gets the outcome UNSETTLED, and where it stands (R2* in 1/ms, ln of
    the amplitude at the first echo) in `rate_out` and `se_out`; what cannot be fitted here gets
    LEFT_TO_ENGINE. `is_even` tells that the echoes are evenly spaced. `m_all` (16 E numbers) and
    `ends` (5 x 16) are scratch.
    """
    n_voxels = len(signal)
    for first_row in range(0, n_voxels, WIDTH):
        n_here = min(WIDTH, n_voxels - first_row)
        _take_in(signal, sigma, first_row, m_all, ends)
        log_a, rate, valid, silent, moving = _start(m_all, times, noise)
        most_steps = FIRST_STEPS
        if again:
            most_steps = MORE_STEPS
            for lane in range(WIDTH):
                ends[lane] = rate_out[first_row + min(lane, n_here - 1)]
                ends[WIDTH + lane] = se_out[first_row + min(lane, n_here - 1)]
            rate, log_a = load(ends, 0), load(ends, WIDTH)
        log_a, rate, settled, moving = _climb(
            m_all, times, is_even, noise, max_rate, most_steps, log_a, rate, moving
        )
        errors, chi2 = _judge(m_all, times, is_even, noise, log_a, rate)
        _write(ends, times, max_rate, log_a, rate, settled, moving, silent, valid, errors, chi2)
        for lane in range(n_here):
            rate_out[first_row + lane] = ends[lane]
            se_out[first_row + lane] = ends[2 * WIDTH + lane]
            chi2_out[first_row + lane] = ends[3 * WIDTH + lane]
            outcome_out[first_row + lane] = np.uint8(ends[4 * WIDTH + lane])
        for lane in range(n_here):
            scale = np.float32(sigma[first_row + lane] if len(sigma) > 1 else sigma[0])
            s0_out[first_row + lane] = scale * ends[WIDTH + lane]
