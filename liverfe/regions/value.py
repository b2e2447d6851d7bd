"""One number for a region, with its interval, or the limit that it lies beyond."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from liverfe.echoes import EchoStack
from liverfe.fit import DecayFit, r2star_bound_per_s, r2star_shift_per_s
from liverfe.noise import NoiseLevel
from liverfe.regions.counts import VoxelCounts, censored_sample
from liverfe.regions.statistics import (
    censored_quantile,
    correlation_inflation,
    median_interval,
)
from liverfe.regions.summary import R2StarSummary

Mask = NDArray[np.bool_]

_MEAN_CENSORED = 0.02
"""Up to this share of censored voxels mean and SD of the rest are given."""
_MEDIAN_OVER_MEAN_SE = 1.2533
"""Standard error of a median over that of a mean, for normal noise: sqrt(pi / 2)."""


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
        Images, noise and fits.
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
            before_trimming=None, **spread,
        )  # fmt: skip
        return over, 0.0
    before = censored_quantile(censored_sample(fit, counts.measured, counts), 0.5)
    before_trimming = before if np.isfinite(before) else None
    inflation = correlation_inflation(fit.r2star_per_s, used)
    at = max(value, 0.0) if np.isfinite(value) else 0.0
    down, up = _interval(sample, at, stack, noise, rules, s0=s0, inflation=inflation)
    if at - down <= 0.0:
        ceiling = at + up if np.isfinite(up) else limit
        under = R2StarSummary(
            value=ceiling, statistic="median", low=None, high=ceiling, qualifier="<",
            before_trimming=before_trimming, **spread,
        )  # fmt: skip
        return under, ceiling
    measured = R2StarSummary(
        value=value, statistic="median", low=at - down,
        high=at + up if at + up <= limit else None,
        qualifier="=", before_trimming=before_trimming, **spread,
    )  # fmt: skip
    return measured, down


def _interval(
    sample: NDArray[np.float64],
    at: float,
    stack: EchoStack,
    noise: NoiseLevel,
    rules: RegionRules,
    *,
    s0: float,
    inflation: float,
) -> tuple[float, float]:
    """How far the interval reaches down and up from the value, the error of sigma included."""
    low, high = median_interval(sample, level=rules.interval, inflation=inflation)
    z = float(ndtri(0.5 + rules.interval / 2.0))
    echoes, sigma, n = stack.echo_times_ms, noise.sigma, noise.n_channels
    voxel = float(r2star_bound_per_s(echoes, at, s0, sigma, n=n))
    # No region's median is known better than noise alone allows.
    least = z * _MEDIAN_OVER_MEAN_SE * voxel / float(np.sqrt(len(sample) / inflation))
    shift = z * noise.relative_sd * abs(float(r2star_shift_per_s(echoes, at, s0, sigma, n=n)))
    down, up = max(at - low, least), max(high - at, least)
    return float(np.hypot(down, shift)), float(np.hypot(up, shift))


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
