"""What any estimator can reach at best: Fisher information, the Cramér-Rao bound, the limits.

The bound is that of a mono-exponential decay with S0 and R2* unknown and sigma known (methods:
information of a Rician or noncentral-chi magnitude, `liverfe.fit.signal.information`).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from liverfe.fit import signal
from liverfe.fit.tables import look_up, signal_tables

Array = NDArray[np.float64]

_SEARCH_LOW_PER_S = 1.0
"""The search for limits starts here: a T2* of one second is beyond any tissue."""
_SEARCH_RATE_TIMES_FIRST_ECHO = 12.0
"""... and ends at this multiple of 1 / TE1, the upper bound of the fit."""
_SEARCH_POINTS = 300
"""Points of the search, 3 % apart; the crossing is interpolated between two of them."""


def r2star_bound_per_s(
    echo_times_ms: ArrayLike,
    r2star_per_s: ArrayLike,
    s0: ArrayLike,
    sigma: ArrayLike,
    *,
    n: int = 1,
) -> Array:
    """Cramér-Rao bound of the standard error of R2*, S0 being unknown too.

    Parameters
    ----------
    echo_times_ms : array_like, shape (E,)
        Echo times in ms.
    r2star_per_s, s0, sigma : array_like
        R2* in 1/s, signal at echo time zero and noise SD per channel (signal units); broadcast.
    n : int
        Effective number of channels.

    Returns
    -------
    ndarray of float64
        Standard error in 1/s; inf where the data hold no information.
    """
    f00, f01, f11, _ = _weights(echo_times_ms, r2star_per_s, s0, sigma, n)
    det = f00 * f11 - f01**2
    resolvable = det > 1e-14 * f00 * f11
    return np.where(resolvable, 1e3 * np.sqrt(f00 / np.where(resolvable, det, 1.0)), np.inf)


def s0_relative_bound(
    echo_times_ms: ArrayLike,
    r2star_per_s: ArrayLike,
    s0: ArrayLike,
    sigma: ArrayLike,
    *,
    n: int = 1,
) -> Array:
    """Cramér-Rao bound of the standard error of S0 as a share of it, R2* being unknown too.

    Parameters
    ----------
    echo_times_ms : array_like, shape (E,)
        Echo times in ms.
    r2star_per_s, s0, sigma : array_like
        R2* in 1/s, signal at echo time zero and noise SD per channel (signal units); broadcast.
    n : int
        Effective number of channels.

    Returns
    -------
    ndarray of float64
        Standard error of ln S0; inf where the data hold no information.
    """
    f00, f01, f11, _ = _weights(echo_times_ms, r2star_per_s, s0, sigma, n)
    det = f00 * f11 - f01**2
    resolvable = det > 1e-14 * f00 * f11
    return np.where(resolvable, np.sqrt(f11 / np.where(resolvable, det, 1.0)), np.inf)


def r2star_shift_per_s(
    echo_times_ms: ArrayLike,
    r2star_per_s: ArrayLike,
    s0: ArrayLike,
    sigma: ArrayLike,
    *,
    n: int = 1,
) -> Array:
    """How far R2* moves for each unit relative error of sigma, to first order.

    The expected magnitude ``sigma E[m](A / sigma)`` changes with sigma at a fixed decay; the shift
    is the change of (S0, R2*) that takes up this difference best, echoes weighted by information.

    Parameters
    ----------
    echo_times_ms : array_like, shape (E,)
        Echo times in ms.
    r2star_per_s, s0, sigma : array_like
        R2* in 1/s, signal at echo time zero and noise SD per channel (signal units); broadcast.
    n : int
        Effective number of channels.

    Returns
    -------
    ndarray of float64
        dR2* / d ln(sigma) in 1/s: a sigma 1 % too high moves R2* by 0.01 of this.
    """
    f00, f01, f11, a = _weights(echo_times_ms, r2star_per_s, s0, sigma, n)
    t = np.asarray(echo_times_ms, dtype=np.float64)
    tables = signal_tables(n)
    u = a / (a + tables.amplitude_scale)
    slope, excess = look_up(tables.slope, u), look_up(tables.excess, u)
    # d(sigma E[m](A/sigma)) / d ln sigma, in sigma; weights are information / slope².
    change = a + excess - a * slope
    weight = np.divide(_information(a, n), slope, out=np.zeros_like(a), where=slope > 1e-12)
    g0 = (weight * a * change).sum(axis=-1)
    g1 = (-t * weight * a * change).sum(axis=-1)
    det = f00 * f11 - f01**2
    resolvable = det > 1e-14 * f00 * f11
    shift = -(f00 * g1 - f01 * g0) / np.where(resolvable, det, 1.0)
    return np.where(resolvable, 1e3 * shift, np.inf)


def relative_se(
    echo_times_ms: ArrayLike,
    r2star_per_s: ArrayLike,
    s0: float,
    sigma: float,
    *,
    n: int = 1,
    sigma_relative_sd: float = 0.0,
) -> Array:
    """Bound of one voxel's standard error with the error of sigma, as a share of R2*."""
    rate = np.asarray(r2star_per_s, dtype=np.float64)
    bound = r2star_bound_per_s(echo_times_ms, rate, s0, sigma, n=n)
    if sigma_relative_sd > 0:
        shift = r2star_shift_per_s(echo_times_ms, rate, s0, sigma, n=n) * sigma_relative_sd
        bound = np.hypot(bound, shift)
    return np.asarray(bound / rate)


def reportable_range(
    echo_times_ms: ArrayLike,
    snr: float,
    *,
    relative: float = 0.10,
    n: int = 1,
    sigma_relative_sd: float = 0.0,
) -> tuple[float, float] | None:
    """R2* between which one voxel's standard error stays within a share of R2*.

    Parameters
    ----------
    echo_times_ms : array_like, shape (E,)
        Echo times in ms, at least two.
    snr : float
        S0 over sigma.
    relative : float
        The share, 0.10 by default.
    n : int
        Effective number of channels.
    sigma_relative_sd : float
        Standard error of sigma as a share of it.

    Returns
    -------
    tuple of float, or None
        Lower and upper R2* in 1/s; None where the share is reached nowhere.
    """
    times = np.asarray(echo_times_ms, dtype=np.float64)
    if len(times) < 2 or not snr > 0:
        return None
    top = 1e3 * _SEARCH_RATE_TIMES_FIRST_ECHO / times[0]
    rates = np.geomspace(_SEARCH_LOW_PER_S, top, _SEARCH_POINTS)
    share = relative_se(times, rates, snr, 1.0, n=n, sigma_relative_sd=sigma_relative_sd)
    inside = np.flatnonzero(share <= relative)
    if not len(inside):
        return None
    first, last = int(inside[0]), int(inside[-1])
    low = rates[0] if first == 0 else _crossing(rates, share, first - 1, relative)
    high = rates[-1] if last == len(rates) - 1 else _crossing(rates, share, last, relative)
    return float(low), float(high)


def best_measured(
    echo_times_ms: ArrayLike, snr: float, *, n: int = 1, sigma_relative_sd: float = 0.0
) -> tuple[float, float]:
    """R2* that one voxel measures best, and its relative standard error there.

    Parameters
    ----------
    echo_times_ms : array_like, shape (E,)
        Echo times in ms, at least two.
    snr : float
        S0 over sigma.
    n : int
        Effective number of channels.
    sigma_relative_sd : float
        Standard error of sigma as a share of it.

    Returns
    -------
    r2star_per_s, relative : float
        In 1/s, and as a share of it.
    """
    times = np.asarray(echo_times_ms, dtype=np.float64)
    top = 1e3 * _SEARCH_RATE_TIMES_FIRST_ECHO / times[0]
    rates = np.geomspace(_SEARCH_LOW_PER_S, top, _SEARCH_POINTS)
    share = relative_se(times, rates, snr, 1.0, n=n, sigma_relative_sd=sigma_relative_sd)
    best = int(np.argmin(share))
    return float(rates[best]), float(share[best])


def upper_limit_per_s(
    echo_times_ms: ArrayLike,
    s0: float,
    sigma: float,
    *,
    relative: float = 0.10,
    n: int = 1,
    sigma_relative_sd: float = 0.0,
) -> float:
    """Upper reportable R2* for a voxel of this S0 and sigma.

    Parameters
    ----------
    echo_times_ms : array_like, shape (E,)
        Echo times in ms, at least two.
    s0, sigma : float
        Signal at echo time zero and noise SD per channel, signal units.
    relative : float
        Share of R2* that the standard error may reach.
    n : int
        Effective number of channels.
    sigma_relative_sd : float
        Standard error of sigma as a share of it.

    Returns
    -------
    float
        In 1/s; NaN where the share is reached nowhere (`reportable_range`).
    """
    found = reportable_range(
        echo_times_ms, s0 / sigma, relative=relative, n=n, sigma_relative_sd=sigma_relative_sd
    )
    return float("nan") if found is None else found[1]


def clear_amplitude(n: int = 1, *, share: float = 0.5) -> float:
    """Amplitude from which an echo tells of the signal rather than of the noise.

    There its information about the amplitude is this share of what Gaussian noise would leave. The
    rule is for amplitudes that a fit predicts: chosen by the magnitude itself, echoes that noise
    has lifted would be kept and those it has lowered dropped.

    Parameters
    ----------
    n : int
        Effective number of channels.
    share : float
        Between 0 and 1.

    Returns
    -------
    float
        In sigma; 0.96 for a half and one channel.
    """
    tables = signal_tables(n)
    u = np.linspace(0.0, 1.0, len(tables.information), endpoint=False)
    reached = int(np.argmax(tables.information[:, 0] >= share))
    part = np.interp(share, tables.information[reached - 1 : reached + 1, 0], (0.0, 1.0))
    at = u[reached - 1] + part * (u[reached] - u[reached - 1])
    return float(tables.amplitude_scale * at / (1.0 - at))


def n_clear_echoes(
    echo_times_ms: ArrayLike,
    r2star_per_s: ArrayLike,
    s0: ArrayLike,
    sigma: ArrayLike,
    *,
    n: int = 1,
) -> NDArray[np.intp]:
    """Count the echoes in which a decay has signal, by the amplitude that it predicts.

    Parameters
    ----------
    echo_times_ms : array_like, shape (E,)
        Echo times in ms, ascending.
    r2star_per_s, s0, sigma : array_like
        R2* in 1/s, at least 0, signal at echo time zero and noise SD per channel (signal units);
        broadcast.
    n : int
        Effective number of channels.

    Returns
    -------
    ndarray of int
        How many echoes reach `clear_amplitude`; 0 where `s0` or R2* is no number.
    """
    rate, level, noise = (np.asarray(x, dtype=np.float64) for x in (r2star_per_s, s0, sigma))
    with np.errstate(divide="ignore", invalid="ignore"):
        headroom = np.log(level / (clear_amplitude(n) * noise))
        until_ms = np.where(headroom > 0.0, 1e3 * headroom / rate, -1.0)
    times = np.asarray(echo_times_ms, dtype=np.float64)
    return np.searchsorted(times, np.nan_to_num(until_ms, nan=-1.0), side="right")


def _weights(
    echo_times_ms: ArrayLike, r2star_per_s: ArrayLike, s0: ArrayLike, sigma: ArrayLike, n: int
) -> tuple[Array, Array, Array, Array]:
    """Information matrix in (ln S0, R2* per ms), and the amplitudes in sigma, shape (..., E)."""
    t = np.asarray(echo_times_ms, dtype=np.float64)
    rate, s0, sigma = (
        np.asarray(x, dtype=np.float64)[..., None] for x in (r2star_per_s, s0, sigma)
    )
    a = signal.amplitude(s0, rate, t) / sigma
    weight = a**2 * _information(a, n)
    return weight.sum(axis=-1), -(t * weight).sum(axis=-1), (t**2 * weight).sum(axis=-1), a


def _information(a: Array, n: int) -> Array:
    tables = signal_tables(n)
    return look_up(tables.information, a / (a + tables.amplitude_scale))


def _crossing(rates: Array, share: Array, k: int, level: float) -> float:
    """Where `share` crosses `level` between points k and k + 1, log-linear in both."""
    if not np.isfinite(share[k : k + 2]).all():
        return float(rates[k] if share[k] <= level else rates[k + 1])
    part = np.log(level / share[k]) / np.log(share[k + 1] / share[k])
    return float(rates[k] * (rates[k + 1] / rates[k]) ** part)
