"""One R2* from all decays of a region together, each with its own S0: for weak signal.

Where no voxel can tell its R2*, hundreds still can: their likelihoods, each over R2* with its own
S0 profiled out, are added up. Iron may differ between the voxels: their R2* is taken as log-normal,
and its spread is found along with its median, because one common rate would follow the slow ones.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtri, chndtr, ndtri

from liverfe.echoes import EchoStack
from liverfe.fit import (
    DecayFit,
    FitOutcome,
    amplitude,
    best_measured,
    profile_r2star,
    r2star_shift_per_s,
)
from liverfe.noise import NoiseLevel
from liverfe.regions.correlation import effective_count
from liverfe.regions.surroundings import correlation_around

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_COARSEST = 0.60
"""A voxel's best relative standard error may be this at most; simulated regions are biased by 1 %
at 0.45 and by 2 % at 0.7."""
_FEWEST = 50
"""Fewer voxels are not fitted together."""
_MOST_VOXELS = 2000
_WIDE = 25
"""Rates of the first, wide look."""
_NODES = 61
_REACH = 2.0
"""The second look covers e to the plus and minus this around the first one's best."""
_FINE = 8001
_SPREADS = (0.0, 0.1, 0.15, 0.2, 0.25, 0.3, 0.4, 0.5, 0.6)
"""SD of ln R2* that are tried."""
_MOST_UNEVEN = 0.25
"""Iron that differs by more than this SD of ln R2* is not fitted together."""
_UNEVEN_BIAS = 0.7
"""Times the squared spread of ln R2*: how far uneven iron draws the joint value down, as each voxel
keeps its own S0 (simulated with spreads up to 0.3)."""
_DARK = 0.10
"""Voxels without signal may exceed what chance makes of the region's signal by this share."""


@dataclass(frozen=True, slots=True, kw_only=True)
class JointFit:
    """What a region's decays say together.

    Attributes
    ----------
    r2star_per_s, low_per_s, high_per_s : float
        Median R2* and its interval, 1/s; the error of sigma is in it.
    sd_per_s : float
        Spread of R2* between voxels, 1/s.
    s0 : float
        Signal at echo time zero, from the power of all echoes; signal units.
    limit_per_s : float
        The R2* that single voxels of this S0 measure best, 1/s: up to it the fit is to be used.
    best : float
        Their relative standard error there.
    n_voxels : int
        Voxels that took part.
    """

    r2star_per_s: float
    low_per_s: float
    high_per_s: float
    sd_per_s: float
    s0: float
    limit_per_s: float
    best: float
    n_voxels: int


def fit_jointly(
    mask: Mask,
    stack: EchoStack,
    noise: NoiseLevel,
    fit: DecayFit,
    *,
    level: float = 0.95,
    relative_se: float = 0.10,
) -> JointFit | None:
    """Fit all decays of a region together, if they can say anything.

    Parameters
    ----------
    mask : ndarray of bool, shape (X, Y, Z)
        The region's voxels.
    stack : EchoStack
        The images.
    noise : NoiseLevel
        Their noise, as the region has it.
    fit : DecayFit
        Their fits, voxel by voxel.
    level : float
        Of the interval.
    relative_se : float
        Share of R2* that the standard error of the joint value may reach.

    Returns
    -------
    JointFit or None
        None where the rule forbids it: fewer than 50 voxels, voxels too weak, some of them without
        signal though the others have it, uneven iron, or a value not known to the share.
    """
    known = mask & (fit.outcome != FitOutcome.NOT_FITTED)
    n_voxels = int(known.sum())
    if n_voxels < _FEWEST or stack.n_echoes < 3:
        return None
    every = max(1, n_voxels // _MOST_VOXELS)
    signal = np.ascontiguousarray(stack.magnitude[known][::every])
    sigma = (
        np.array([noise.sigma])
        if noise.sigma_map is None
        else noise.sigma_map[known][::every].astype(np.float64)
    )
    first = _best_rate(signal, stack, sigma, noise)
    s0 = _level(signal, stack, sigma, noise, first)
    snr = s0 / noise.sigma
    if not snr > 1.0:
        return None
    limit, best = best_measured(
        stack.echo_times_ms, snr, n=noise.n_channels, sigma_relative_sd=noise.relative_sd
    )
    dark = float((fit.outcome[known] == FitOutcome.NO_SIGNAL).mean())
    if best > _COARSEST or dark > _expected_dark(stack, noise, snr, first) + _DARK:
        return None
    independent = effective_count(known, correlation_around(known, stack, noise, fit)) / n_voxels
    # Voxels picked far apart share less noise than neighbours do; none counts for more than one.
    weight = min(independent * n_voxels / len(signal), 1.0)
    nodes = first * np.exp(np.linspace(-_REACH, _REACH, _NODES))
    likelihood = profile_r2star(signal, stack.echo_times_ms, nodes, sigma, noise.n_channels)
    found = _median_of(likelihood, nodes, weight, level)
    if found is None or found[3] > _MOST_UNEVEN:
        return None
    value, low, high, spread = found
    z = float(ndtri(0.5 + level / 2.0))
    shift = z * noise.relative_sd * abs(
        float(r2star_shift_per_s(stack.echo_times_ms, value, s0, noise.sigma, n=noise.n_channels))
    )  # fmt: skip
    down, up = float(np.hypot(value - low, shift)), float(np.hypot(high - value, shift))
    up += _UNEVEN_BIAS * spread**2 * value
    if not max(down, up) <= z * relative_se * value and value - down > 0.0:
        return None
    return JointFit(
        r2star_per_s=value, low_per_s=value - down, high_per_s=value + up, sd_per_s=spread * value,
        s0=s0, limit_per_s=limit, best=best, n_voxels=n_voxels,
    )  # fmt: skip


def _best_rate(
    signal: NDArray[np.float32], stack: EchoStack, sigma: Array, noise: NoiseLevel
) -> float:
    """Common R2* by a wide look, 1/s."""
    times = stack.echo_times_ms
    rates = np.geomspace(50.0 / times[-1], 3000.0 / times[0], _WIDE)
    few = signal[:: max(1, len(signal) // 500)]
    some = sigma if len(sigma) == 1 else sigma[:: max(1, len(signal) // 500)]
    total = np.nansum(profile_r2star(few, times, rates, some, noise.n_channels), axis=0)
    return float(rates[int(np.argmax(total))])


def _level(
    signal: NDArray[np.float32], stack: EchoStack, sigma: Array, noise: NoiseLevel, rate: float
) -> float:
    """S0 from the mean power over all echoes, ``E[M²] = A² + 2 n sigma²``; signal units."""
    noise_power = 2.0 * noise.n_channels * float((sigma**2).mean())
    power = float((signal.astype(np.float64) ** 2 - noise_power).mean(axis=0).sum())
    decay = amplitude(1.0, rate, stack.echo_times_ms)
    return float(np.sqrt(max(power, 0.0) / (decay**2).sum()))


def _expected_dark(stack: EchoStack, noise: NoiseLevel, snr: float, rate: float) -> float:
    """Share of voxels of this signal whose echoes look like noise to the fit (one in a thousand of
    noise does not)."""
    degrees = 2 * noise.n_channels * stack.n_echoes
    a = amplitude(snr, rate, stack.echo_times_ms)
    return float(chndtr(chdtri(degrees, 1e-3), degrees, (a**2).sum()))


def _median_of(
    likelihood: Array, nodes: Array, weight: float, level: float
) -> tuple[float, float, float, float] | None:
    """Median R2* of log-normal voxels, its profile-likelihood interval, and SD of ln R2*.

    `weight` says how many independent voxels each row stands for. None where the rates end before
    the interval does.
    """
    # Late: it brings a fifth of a second of imports, and few regions come here.
    from scipy.interpolate import CubicSpline  # noqa: PLC0415

    usable = np.isfinite(likelihood).all(axis=1)
    log_l = likelihood[usable] - likelihood[usable].max(axis=1, keepdims=True)
    x = np.log(nodes)
    step = x[1] - x[0]
    centres = np.arange(x[0] + 1.0, x[-1] - 1.0, step / 4.0)
    by_spread = np.empty((len(_SPREADS), len(centres)))
    by_spread[0] = CubicSpline(x, log_l.sum(axis=0))(centres)
    density = np.exp(log_l)
    for k, spread in enumerate(_SPREADS[1:], start=1):
        prior = np.exp(-0.5 * ((x[:, None] - centres) / spread) ** 2)
        by_spread[k] = np.log(density @ (prior / prior.sum(axis=0))).sum(axis=0)
    found = CubicSpline(centres, weight * by_spread.max(axis=0))
    fine = np.linspace(centres[0], centres[-1], _FINE)
    profile = found(fine)
    peak = int(np.argmax(profile))
    inside = np.flatnonzero(profile >= profile[peak] - 0.5 * chdtri(1, 1.0 - level))
    if inside[0] == 0 or inside[-1] == _FINE - 1:
        return None
    value, low, high = np.exp(fine[[peak, inside[0], inside[-1]]])
    return float(value), float(low), float(high), _SPREADS[int(np.argmax(by_spread.max(axis=1)))]
