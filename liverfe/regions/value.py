"""One number for a region, with its interval, or the limit that it lies beyond."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from liverfe.echoes import EchoStack
from liverfe.fit import DecayFit, r2star_bound_per_s, r2star_shift_per_s, s0_relative_bound
from liverfe.noise import NoiseLevel
from liverfe.regions.counts import VoxelCounts, censored_sample
from liverfe.regions.joint import JointFit
from liverfe.regions.precision import MedianPrecision, median_precision
from liverfe.regions.precision import spread as robust_sd
from liverfe.regions.statistics import censored_quantile
from liverfe.regions.summary import R2StarSummary
from liverfe.regions.surroundings import correlation_around

Mask = NDArray[np.bool_]

_MEAN_CENSORED = 0.02
"""Up to this share of censored voxels mean and SD of the rest are given."""
_OWN_LEVEL = 0.5
"""Voxels speak for their own S0 if this share of them is measured."""
_MOST_VOXELS = 2000
"""Voxels whose standard errors are worked out, evenly taken."""
_STEP = 0.02
"""Relative step in which the slope of the standard error against R2* is taken."""


@dataclass(frozen=True, slots=True, kw_only=True)
class RegionRules:
    """Choices of the method that a region's summary depends on.

    Attributes
    ----------
    voxel_relative_se : float
        Share of R2* that one voxel's standard error may reach at the upper limit.
    trim : {'none', 'mad'}
        Rule for outliers.
    trim_mads : float
        How many scaled MADs from the median an outlier lies.
    interval : float
        Level of the interval.
    censored_share : float
        With at least this share of voxels over the limit the region is.
    """

    voxel_relative_se: float = 0.10
    trim: str = "mad"
    trim_mads: float = 5.0
    interval: float = 0.95
    censored_share: float = 0.5


def region_value(
    sample: NDArray[np.float64],
    used: Mask,
    counts: VoxelCounts,
    stack: EchoStack,
    noise: NoiseLevel,
    fit: DecayFit,
    rules: RegionRules,
    *,
    limit: float,
    s0: float,
) -> tuple[R2StarSummary, float]:
    """State a region's R2*: measured, over the limit, or under what can be told from none.

    Parameters
    ----------
    sample : ndarray of float64, shape (N,)
        All voxels that say something, ascending, censored ones at infinity; at least one.
    used : ndarray of bool, shape (X, Y, Z)
        Measured voxels that were not trimmed.
    counts : VoxelCounts
        The region's voxels by kind.
    stack, noise, fit
        Images, the region's noise, and fits.
    rules : RegionRules
        Choices of the method.
    limit, s0 : float
        The upper limit in 1/s, and the S0 that it holds for.

    Returns
    -------
    r2star : R2StarSummary
        Value, interval and spread.
    low_limit_per_s : float
        The lower limit, from the interval.
    """
    value = censored_quantile(sample, 0.5)
    spread = _spread(fit.r2star_per_s[used].astype(np.float64), sample)
    over_share = float(counts.over.sum()) / len(sample)
    if over_share >= rules.censored_share or value == np.inf:
        over = R2StarSummary(
            value=limit, statistic="median", low=limit, high=None, qualifier=">",
            before_trimming=None, sd_biological=None, **spread,
        )  # fmt: skip
        return over, 0.0
    before = censored_quantile(censored_sample(fit, counts.measured, counts), 0.5)
    before_trimming = before if np.isfinite(before) else None
    at = max(value, 0.0) if np.isfinite(value) else 0.0
    known = _precision(at, used, counts, stack, noise, fit, s0=s0)
    down, up = _interval(at, known, stack, noise, rules, s0=s0)
    biological = None if spread["sd"] is None else known.sd_biological_per_s
    if at - down <= 0.0:
        ceiling = at + up if np.isfinite(up) else limit
        under = R2StarSummary(
            value=ceiling, statistic="median", low=None, high=ceiling, qualifier="<",
            before_trimming=before_trimming, sd_biological=biological, **spread,
        )  # fmt: skip
        return under, ceiling
    measured = R2StarSummary(
        value=value, statistic="median", low=at - down,
        high=at + up if at + up <= limit else None,
        qualifier="=", before_trimming=before_trimming, sd_biological=biological, **spread,
    )  # fmt: skip
    return measured, (down + up) / 2.0


def joint_value(
    joint: JointFit, sample: NDArray[np.float64], rate: NDArray[np.float64]
) -> tuple[R2StarSummary, float]:
    """State a region's R2* from the fit of all its decays together.

    Parameters
    ----------
    joint : JointFit
        That fit.
    sample : ndarray of float64, shape (N,)
        All voxels that say something, ascending, censored ones at infinity.
    rate : ndarray of float64, shape (M,)
        R2* of the measured voxels, 1/s.

    Returns
    -------
    r2star : R2StarSummary
        Value and interval of the joint fit, or its limit; spread of the single voxels.
    low_limit_per_s : float
        The lower limit, from the interval.
    """
    value, limit = joint.r2star_per_s, joint.limit_per_s
    is_over = value > limit
    stated = R2StarSummary(
        value=limit if is_over else value,
        statistic="joint",
        low=limit if is_over else joint.low_per_s,
        high=joint.high_per_s if joint.high_per_s <= limit else None,
        qualifier=">" if is_over else "=",
        before_trimming=None,
        sd_biological=None if is_over else joint.sd_per_s,
        **_spread(rate, sample),
    )
    return stated, 0.0 if is_over else value - joint.low_per_s


def _precision(
    at: float,
    used: Mask,
    counts: VoxelCounts,
    stack: EchoStack,
    noise: NoiseLevel,
    fit: DecayFit,
    *,
    s0: float,
) -> MedianPrecision:
    """How well the median of the voxels that say something is known."""
    voxels = used | counts.over | counts.under
    rate = np.where(np.isfinite(fit.r2star_per_s), fit.r2star_per_s, np.inf)
    values = np.where(counts.under, -np.inf, rate)[voxels].astype(np.float64)
    if not np.isfinite(np.median(values)):
        values = np.full(len(values), at)  # half of them do not decay: noise alone speaks
    level, sigma = np.array([s0]), np.array([noise.sigma])
    if int(used.sum()) >= _OWN_LEVEL * len(values):
        every = max(1, int(used.sum()) // _MOST_VOXELS)
        level = _true_levels(fit.s0[used][::every].astype(np.float64), at, stack, noise, s0)
        if noise.sigma_map is not None:
            sigma = noise.sigma_map[used][::every].astype(np.float64)
    echoes, n = stack.echo_times_ms, noise.n_channels
    step = _STEP * max(at, 1.0)
    less, more = r2star_bound_per_s(echoes, [max(at - step, 0.0), at + step], s0, noise.sigma, n=n)
    return median_precision(
        values,
        voxels,
        r2star_bound_per_s(echoes, at, level, sigma, n=n),
        correlation_around(voxels, stack, noise, fit),
        slope=float(more - less) / (at + step - max(at - step, 0.0)),
        sigma_relative_sd=noise.relative_sd,
    )


def _true_levels(
    level: NDArray[np.float64], at: float, stack: EchoStack, noise: NoiseLevel, s0: float
) -> NDArray[np.float64]:
    """S0 of voxels drawn together until their spread is without that of noise.

    The bound bends with S0: the scatter of fitted S0 near the limit would make it a few percent
    too wide.
    """
    away = np.log(level / s0)
    of_noise = float(
        s0_relative_bound(stack.echo_times_ms, at, s0, noise.sigma, n=noise.n_channels)
    )
    own = 1.0 - (of_noise / max(robust_sd(away), 1e-9)) ** 2
    return np.asarray(s0 * np.exp(np.sqrt(max(own, 0.0)) * away))


def _interval(
    at: float,
    known: MedianPrecision,
    stack: EchoStack,
    noise: NoiseLevel,
    rules: RegionRules,
    *,
    s0: float,
) -> tuple[float, float]:
    """How far the interval reaches down and up from the value, the error of sigma included."""
    z = float(ndtri(0.5 + rules.interval / 2.0))
    shift = r2star_shift_per_s(stack.echo_times_ms, at, s0, noise.sigma, n=noise.n_channels)
    half = z * float(np.hypot(known.se_per_s, noise.relative_sd * float(shift)))
    # The true median lies higher by what noise has drawn the observed one down.
    return max(half - known.drawn_down_per_s, 0.0), half + known.drawn_down_per_s


def _spread(rate: NDArray[np.float64], sample: NDArray[np.float64]) -> dict[str, float | None]:
    """Quartile range, mean and SD, each only where censored voxels leave it knowable."""
    quartiles = censored_quantile(sample, 0.25), censored_quantile(sample, 0.75)
    censored_share = 1.0 - len(rate) / len(sample)
    knowable = censored_share <= _MEAN_CENSORED and len(rate) > 1
    return {
        "iqr": quartiles[1] - quartiles[0] if np.isfinite(quartiles).all() else None,
        "mean": float(rate.mean()) if knowable else None,
        "sd": float(rate.std(ddof=1)) if knowable else None,
    }
