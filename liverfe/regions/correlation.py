"""How alike the noise of neighbouring voxels is, measured in the images themselves.

Interpolated and filtered images repeat the same noise in neighbouring voxels: a region of N voxels
then knows its median no better than fewer independent ones. What the model leaves over in each
voxel (the residuals of its decay) is noise alone, free of the liver's own pattern; its correlation
from voxel to voxel, lag by lag, is that of the noise of R2*.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.fft import irfft2, next_fast_len, rfft2

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

LONGEST_LAG = 10
"""In-plane lags up to this are measured, the last at half weight: for images interpolated by 1.5 or
2, whose correlation swings about zero, the sum over them is within 4 % of the whole."""
_LONGEST_SLICE_LAG = 2
_SIGNIFICANT = 2.0
"""Correlations below this many of their own standard errors are taken as none."""
_FEWEST = 4
_TREND_FROM = 60
"""From this many voxels on each image's mean residual is taken off first: a misfit that all voxels
share is no correlation of noise. In fewer voxels that would hide the correlation itself."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class NoiseCorrelation:
    """Correlation of the noise between voxels by their distance.

    Attributes
    ----------
    in_plane : ndarray of float64, shape (L + 1, L + 1)
        By lag along the two in-plane axes, signs pooled; 1 at [0, 0], 0 where none was seen.
    between_slices : ndarray of float64, shape (K + 1,)
        By distance in slices; 1 at [0]. A voxel pair has the product of both.
    """

    in_plane: Array
    between_slices: Array

    @property
    def is_white(self) -> bool:
        """Whether no correlation was seen."""
        return not (self.in_plane.ravel()[1:].any() or self.between_slices[1:].any())


WHITE = NoiseCorrelation(in_plane=np.ones((1, 1)), between_slices=np.ones(1))
"""Independent voxels."""


def pair_counts(mask: Mask, *, longest: int = LONGEST_LAG, slices: int = 0) -> Array:
    """Count ordered voxel pairs of a mask by their distance.

    Parameters
    ----------
    mask : ndarray of bool, shape (X, Y, Z)
        The voxels.
    longest, slices : int
        Greatest lag in the plane and between slices.

    Returns
    -------
    ndarray of float64, shape (longest + 1, longest + 1, slices + 1)
        Signs pooled; [0, 0, 0] is the number of voxels.
    """
    known = mask[bounding_box(mask)].astype(np.float32)[..., None]
    return _pooled_products(known, longest, slices)


def correlation_by_lag(
    values: NDArray[np.floating],
    mask: Mask,
    *,
    usable: Mask | None = None,
    longest: int = LONGEST_LAG,
    slices: int = 0,
) -> tuple[Array, Array]:
    """Autocorrelation of images over the voxels of a mask.

    Parameters
    ----------
    values : ndarray, shape (N, E)
        E values of each voxel of the mask, with zero mean; in the order of ``np.nonzero(mask)``.
    mask : ndarray of bool, shape (X, Y, Z)
        The voxels, N of them.
    usable : ndarray of bool, shape (N, E), or None
        Values that count; None: all.
    longest, slices : int
        Greatest lag in the plane and between slices.

    Returns
    -------
    correlation, n_pairs : ndarray of float64, shape (longest + 1, longest + 1, slices + 1)
        Mean product of pairs over the mean square, 0 where there is no pair; and the number of
        unordered pairs behind it, all images together.
    """
    known = mask[bounding_box(mask)]
    counts = np.zeros((*known.shape, values.shape[1]), dtype=np.float32)
    counts[known] = 1.0 if usable is None else usable
    images = np.zeros_like(counts)
    images[known] = values
    products = _pooled_products(images * counts, longest, slices)
    pairs = np.maximum(_pooled_products(counts, longest, slices), 0.0).round()
    square = products[0, 0, 0] / max(pairs[0, 0, 0], 1.0)
    if not square > 0:
        return np.zeros_like(products), pairs / 2.0
    return products / np.maximum(pairs, 1.0) / square, pairs / 2.0


def noise_correlation(
    residuals: NDArray[np.floating],
    usable: Mask,
    mask: Mask,
    *,
    taken_up: float = 2.0,
    averaged: int | None = None,
) -> NoiseCorrelation:
    """Measure the correlation of noise from what fits leave over.

    Parameters
    ----------
    residuals : ndarray, shape (N, E)
        Residual of each voxel and echo in sigma, in the order of ``np.nonzero(mask)``.
    usable : ndarray of bool, shape (N, E)
        Echoes in which a voxel has signal: the noise of signal and that of its absence differ.
    mask : ndarray of bool, shape (X, Y, Z)
        The voxels, N of them.
    taken_up : float
        Parameters of the fit, which take their share of the noise along.
    averaged : int or None
        Voxels in the mean that was taken off already; None: the mean over all is taken off here.

    Returns
    -------
    NoiseCorrelation
        Lags without a significant correlation hold 0.
    """
    used = usable.sum(axis=1)
    if len(residuals) < _FEWEST or used.mean() <= taken_up:
        return WHITE
    degrees = 1.0 - taken_up / float(used.mean())
    if averaged is None and len(residuals) >= _TREND_FROM:
        averaged = len(residuals)
        counts = np.maximum(usable.sum(axis=0), 1)
        residuals = residuals - np.where(usable, residuals, 0.0).sum(axis=0) / counts
    flat, n_flat = correlation_by_lag(residuals, mask, usable=usable)
    in_plane = _significant(flat[..., 0], n_flat[..., 0], degrees)
    if averaged is not None:
        # The mean took its own noise along: what it shares with every voxel is given back.
        shared = float((in_plane * n_flat[..., 0]).sum() / n_flat[0, 0, 0])
        lost = min(max(shared, 1.0) / averaged, 0.5)
        in_plane = _significant(flat[..., 0] * (1.0 - lost) + lost, n_flat[..., 0], degrees)
    in_plane[LONGEST_LAG] *= 0.5
    in_plane[:, LONGEST_LAG] *= 0.5
    between = np.ones(1)
    if mask.shape[2] > 1:
        slices = min(_LONGEST_SLICE_LAG, mask.shape[2] - 1)
        deep, n_deep = correlation_by_lag(residuals, mask, usable=usable, longest=0, slices=slices)
        between = _significant(deep[0, 0], n_deep[0, 0], degrees)
    return NoiseCorrelation(in_plane=in_plane, between_slices=between)


def effective_count(mask: Mask, correlation: NoiseCorrelation) -> float:
    """How many independent voxels know a mean as well as those of a mask.

    ``N² / sum over pairs of their correlation`` (methods: 10 x 10 voxels of images interpolated by
    two count as 26.7, 20 x 20 as 103.3).

    Parameters
    ----------
    mask : ndarray of bool, shape (X, Y, Z)
        The voxels.
    correlation : NoiseCorrelation
        Of their noise.

    Returns
    -------
    float
        1 to N.
    """
    n = float(mask.sum())
    alike, n_pairs = pair_correlations(mask, correlation)
    return float(np.clip(n**2 / (alike * n_pairs).sum(), 1.0, n))


def pair_correlations(mask: Mask, correlation: NoiseCorrelation) -> tuple[Array, Array]:
    """Correlation and number of ordered pairs of a mask's voxels, by lag.

    Parameters
    ----------
    mask : ndarray of bool, shape (X, Y, Z)
        The voxels.
    correlation : NoiseCorrelation
        Of their noise.

    Returns
    -------
    correlation, n_pairs : ndarray of float64, shape (L + 1, L + 1, K + 1)
        At [0, 0, 0]: 1 and the number of voxels.
    """
    in_plane, between = correlation.in_plane, correlation.between_slices
    counts = pair_counts(mask, longest=len(in_plane) - 1, slices=len(between) - 1)
    return in_plane[..., None] * between, counts


def _significant(correlation: Array, n_pairs: Array, degrees: float) -> Array:
    se = 1.0 / np.sqrt(np.maximum(n_pairs * degrees, 1.0))
    kept = np.where((np.abs(correlation) > _SIGNIFICANT * se) & (n_pairs > 0), correlation, 0.0)
    kept.flat[0] = 1.0
    return np.clip(kept, -1.0, 1.0)


def bounding_box(mask: Mask) -> tuple[slice, ...]:
    """Smallest box around the voxels of a mask."""
    extent = []
    for axis in range(3):
        others = tuple(a for a in range(3) if a != axis)
        at = np.flatnonzero(mask.any(axis=others))
        extent.append(slice(int(at[0]), int(at[-1]) + 1))
    return tuple(extent)


def _pooled_products(images: NDArray[np.float32], longest: int, slices: int) -> Array:
    """Sum over ordered pairs of voxels of their product, by lag with signs pooled."""
    x, y = images.shape[:2]
    padded = (next_fast_len(x + longest, real=True), next_fast_len(y + longest, real=True))
    spectrum = rfft2(images, padded, axes=(0, 1))
    total = np.zeros((longest + 1, longest + 1, slices + 1))
    for dz in range(min(slices, images.shape[2] - 1) + 1):
        here, there = spectrum[:, :, : images.shape[2] - dz], spectrum[:, :, dz:]
        power = (here * there.conj()).sum(axis=(2, 3))
        product = irfft2(power, padded, axes=(0, 1)) * (1.0 if dz == 0 else 2.0)
        for dx in range(longest + 1):
            for dy in range(longest + 1):
                signs = {(sx * dx, sy * dy) for sx in (1, -1) for sy in (1, -1)}
                total[dx, dy, dz] = sum(product[sign] for sign in signs)
    return total
