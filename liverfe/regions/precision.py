"""How well a region's median is known: noise of its voxels apart from its own pattern.

The median stands for the region as it was scanned: its interval says how far noise may have moved
it from the median of the true R2* of these very voxels. Iron that differs between voxels is no
error of that median; it widens the interval only as far as noise reorders voxels around it.

With true values X and noise of standard error s, a voxel lies below the region's median by chance
where it lies close to it. To first order the median's variance is ``sum cov(below, below') / (N
f)²``: f is the density of voxels at the median, and two normal values of correlation r lie below
their median together ``1/4 + asin(r) / 2 pi`` of the time.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import uniform_filter
from scipy.special import ndtr

from liverfe.regions.correlation import (
    NoiseCorrelation,
    bounding_box,
    correlation_by_lag,
    pair_correlations,
)

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_BIWEIGHT_REACH = 9.0
"""Values this many MADs from the median do not count in the spread (Mosteller and Tukey)."""
_BIWEIGHT_EFFICIENCY = 0.87
"""Of the biweight midvariance against the variance, for normal values."""
_MAD_TO_SD = 1.4826
_NOISE_SPREAD_MORE = 0.03
"""Near the limit noise spreads by up to this share more than its bound."""
_SIGNIFICANT = 2.0
"""Spread beyond noise by this many standard errors of the spread is told as biology."""
_SKEW_LEAVES = 0.5
"""Of what the slope of the standard error alone would draw a median down; the right skew of iron
undoes the rest (gamma distributed iron, CV 0.1 to 0.3, at the limit: 0.5 to 0.6)."""
_CLOSE_POWER = 2.5
"""Joins the two regimes of `_standard_error`; within 5 % of simulated medians from 12 voxels on."""
_LOCAL = 5
"""Width in voxels of the local mean that shows a smooth pattern of iron without its noise."""
_PATTERN_FROM = 100
"""A pattern is looked for from this many voxels on."""


@dataclass(frozen=True, slots=True, kw_only=True)
class MedianPrecision:
    """What noise does to the median of a region's voxels.

    Attributes
    ----------
    se_per_s : float
        Standard error of the median, 1/s; the error of sigma is not in it.
    drawn_down_per_s : float
        By how much noise has drawn the median down, 1/s: of voxels with different iron the fast
        ones scatter more. 0 where iron is even.
    sd_biological_per_s : float
        Spread of R2* between voxels that noise does not explain, 1/s; 0 where noise explains all.
    """

    se_per_s: float
    drawn_down_per_s: float
    sd_biological_per_s: float


def median_precision(
    values: Array,
    mask: Mask,
    voxel_se: Array,
    correlation: NoiseCorrelation,
    *,
    slope: float = 0.0,
    sigma_relative_sd: float = 0.0,
) -> MedianPrecision:
    """Tell how well the median of a region's voxels is known.

    Parameters
    ----------
    values : ndarray of float64, shape (N,)
        R2* of each voxel of the mask in 1/s, in the order of ``np.nonzero(mask)``; infinite where
        it is only known to lie over or under. Their median must be finite.
    mask : ndarray of bool, shape (X, Y, Z)
        The voxels, N of them.
    voxel_se : ndarray of float64, shape (M,)
        Standard errors of the region's voxels, or of some that stand for them, if their R2* were
        the median; 1/s, above 0.
    correlation : NoiseCorrelation
        Of the voxels' noise.
    slope : float
        How fast the standard error grows with R2*.
    sigma_relative_sd : float
        Standard error of sigma as a share of it: noise is known no better.

    Returns
    -------
    MedianPrecision
        Of this region's own median.
    """
    n = len(values)
    noise_square = float((voxel_se**2).mean())
    noise = float(1.0 / (1.0 / voxel_se).mean())  # what the density of voxels at the median has
    square = max(spread(values) ** 2, 1e-12 * noise_square)
    excess = max(square - (1.0 + _NOISE_SPREAD_MORE) * noise_square, 0.0)
    uneven = excess / (excess + noise_square)
    alike, n_pairs = pair_correlations(mask, correlation)
    repeats = _repeats(values, mask, uneven, alike, n_pairs)
    se = noise * _standard_error(n, float(np.sqrt(excess)) / noise, repeats)
    if n >= _PATTERN_FROM and excess > 0:
        se = float(np.hypot(se, _pattern_shift(values, mask, noise)))
    repeats_of_square = float((alike**2 * n_pairs).sum()) / n
    doubt = square * np.sqrt(2.0 * repeats_of_square / (_BIWEIGHT_EFFICIENCY * n))
    doubt += sigma_relative_sd * noise_square
    return MedianPrecision(
        se_per_s=se,
        drawn_down_per_s=max(_SKEW_LEAVES * uneven * noise * slope, 0.0),
        sd_biological_per_s=float(np.sqrt(excess)) if excess > _SIGNIFICANT * doubt else 0.0,
    )


def _standard_error(n: int, ratio: float, repeats: float) -> float:
    """Standard error of a region's own median, in standard errors of one voxel.

    True values X of SD ``ratio``, noise of SD 1. With many voxels about the median the error is
    that of the difference of two correlated medians, observed and true; ``asin`` gives how often
    both lie on one side. With few, noise can do no more than move the middle voxels themselves:
    one of an odd number, two of an even one.
    """
    total = np.hypot(1.0, ratio)
    share = (ratio / total) ** 2
    own = (total**2 + ratio**2) * np.pi / 2.0 - 2.0 * ratio * total * np.arcsin(np.sqrt(share))
    noise = total**2 * (np.pi / 2.0 - np.arcsin(share))
    many = np.sqrt((own + noise * (repeats - 1.0)) / n)
    few = 1.0 if n % 2 else np.sqrt(0.5)
    crowded = 1.0 + (np.sqrt(own / (repeats * n)) / few) ** _CLOSE_POWER
    return float(many * crowded ** (-1.0 / _CLOSE_POWER))


def _pattern_shift(values: Array, mask: Mask, noise: float) -> float:
    """How far noise moves the median of the region's smooth pattern of iron, 1/s.

    Where more voxels lie just above the median than just below it, noise carries more of them
    across. The pattern is the mean over neighbours, in which noise has averaged out.
    """
    inside = mask[bounding_box(mask)]
    middle = float(np.median(values))
    reach = 4.0 * spread(values)
    image = np.zeros(inside.shape)
    image[inside] = np.clip(values - middle, -reach, reach)
    width = (_LOCAL, _LOCAL, 1)
    count = uniform_filter(inside.astype(np.float64), width, mode="constant")[inside]
    pattern = uniform_filter(image, width, mode="constant")[inside] / count
    pattern -= np.median(pattern)
    density = float(np.exp(-0.5 * (pattern / noise) ** 2).mean()) / np.sqrt(2.0 * np.pi)
    return float(noise * (ndtr(-pattern / noise).mean() - 0.5) / density)


def spread(values: Array) -> float:
    """Robust standard deviation: the square root of the biweight midvariance.

    Infinite values count as far away; where they are many on one side the other is mirrored.
    """
    middle = float(np.median(values))
    finite = np.isfinite(values)
    away = values[finite] - middle
    mad = float(np.median(np.abs(np.where(finite, values, np.inf) - middle)))
    if not np.isfinite(mad):
        above, under = int((values == np.inf).sum()), int((values == -np.inf).sum())
        side = away[away <= 0] if above >= under else away[away >= 0]
        away = np.concatenate([side, -side])
        mad = float(np.median(np.abs(away)))
    if not mad > 0:
        return float(away.std()) if len(away) else 0.0
    u2 = (away / (_BIWEIGHT_REACH * mad)) ** 2
    inside = u2 < 1.0
    away, u2 = away[inside], u2[inside]
    top = (away**2 * (1.0 - u2) ** 4).sum()
    bottom = ((1.0 - u2) * (1.0 - 5.0 * u2)).sum()
    count = len(values) if len(values) == finite.sum() else len(away)
    return float(np.sqrt(count * top) / abs(bottom))


def _repeats(values: Array, mask: Mask, uneven: float, alike: Array, n_pairs: Array) -> float:
    """How many voxels count as one in the median.

    Two voxels' chance of lying below together, less what their true values alone would make: with
    correlation c of their values and t of their true values, ``asin(c) - asin(t)``.
    """
    n = n_pairs[0, 0, 0]
    if not alike.ravel()[1:].any():
        return 1.0
    noise = (1.0 - uneven) * alike
    true = np.zeros_like(alike)
    if uneven > 0:
        clipped = np.where(np.isfinite(values), values, np.median(values))
        away = clipped - np.median(values)
        reach = 3.0 * max(spread(values), 1e-30)
        away = np.clip(away, -reach, reach)
        seen, _ = correlation_by_lag(
            away[:, None], mask, longest=alike.shape[0] - 1, slices=alike.shape[2] - 1
        )
        true = np.clip(seen - noise, 0.0, uneven)
    true[0, 0, 0] = uneven
    term = np.arcsin(np.clip(true + noise, -1.0, 1.0)) - np.arcsin(true)
    return float(max((term * n_pairs).sum() / (term[0, 0, 0] * n), 1.0))
