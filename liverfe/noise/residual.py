"""Sigma from the residuals of a decay, in voxels and echoes with high signal.

There the noise of a magnitude is Gaussian with SD sigma, once the noise power of the channels is
taken off, so this works without background air and measures the noise where the tissue is.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtri

from liverfe.echoes import EchoStack
from liverfe.noise.level import NoiseCandidate

_BRIGHT_SHARE = 0.3
"""Voxels brighter at the first echo than this share of the brightest percent are tissue."""
_PARTNER = 4
"""A voxel's partner lies this many voxels further along a row or column: near enough to decay
alike, and where interpolation by 2 or 4 leaves no correlation of noise."""
_HIGH_SIGNAL = 8.0
"""Echoes of an amplitude above this many sigma count, by the voxel between the two ..."""
_STILL_SIGNAL = 4.0
"""... as long as neither of the two is below this, which noise alone never brings about."""
_ALIKE = 1.5
"""Partners differ by less than this factor at the first echo: they lie in one tissue."""
_FEWEST_ECHOES = 3
_ENOUGH_VOXELS = 200
_MOST_VOXELS = 60_000
_LEAST_RELATIVE_SD = 0.02
"""Sigma from residuals is never believed better than this: the model is not exact either."""
_ROUNDS = 8

Array = NDArray[np.float64]


def sigma_from_residuals(
    stack: EchoStack, *, start_sigma: float | None = None, n_channels: int = 1
) -> NoiseCandidate:
    """Estimate sigma from how two voxels near each other decay.

    The logarithm of the ratio of their signals is a straight line in echo time; the weighted
    residual sum of squares is sigma² times chi-square with N - 2 degrees. A ratio, because what one
    exponential does not explain (fat, two kinds of tissue) is much the same in both and cancels,
    where it would pass for noise and hide the misfit. A third voxel says which echoes count: one
    that chose its own would keep those that noise happens to lift. The median over pairs keeps
    vessels and artefacts out.

    Parameters
    ----------
    stack : EchoStack
        Magnitudes in true values.
    start_sigma : float or None
        Where to start the iteration between sigma and the echoes that count.
    n_channels : int
        Effective number of channels, whose noise power ``(2n - 1) sigma²`` is taken off.

    Returns
    -------
    NoiseCandidate
        Sigma, or None with a remark that says why there is none.
    """
    if stack.n_echoes < _FEWEST_ECHOES:
        return _closed("two echoes leave no residual")
    square = bright_triplets(stack)
    if square.shape[1] < _ENOUGH_VOXELS:
        return _closed("too few voxels with high signal")
    sigma = start_sigma or float(np.sqrt(np.median(square[..., 0]))) / 50.0
    middle = np.array([chdtri(max(k - 2, 1), 0.5) for k in range(stack.n_echoes + 1)])
    n_voxels, degrees = 0, 0
    for _ in range(_ROUNDS):
        power = square - (2 * n_channels - 1) * sigma**2
        leading = np.cumprod(power[1] > (_HIGH_SIGNAL * sigma) ** 2, axis=1).sum(axis=1)
        still = np.cumprod((power[[0, 2]] > (_STILL_SIGNAL * sigma) ** 2).all(axis=0), axis=1).sum(
            axis=1
        )
        enough = (leading >= _FEWEST_ECHOES) & (still >= leading)
        n_voxels = int(enough.sum())
        if n_voxels < _ENOUGH_VOXELS:
            return _closed("too few voxels with three echoes of high signal", n_voxels)
        kept = leading[enough]
        one, other = power[0][enough], power[2][enough]
        rss = _weighted_rss(one, other, stack.echo_times_ms, kept, n_channels * sigma**2)
        updated = float(np.sqrt(np.median(rss / middle[kept])))
        degrees = int((kept - 2).sum())
        if not updated > 0:
            return _closed("the residuals are exactly zero", n_voxels)
        settled = abs(updated - sigma) < 1e-3 * sigma
        sigma = updated
        if settled:
            break
    return NoiseCandidate(
        method="residual",
        sigma=sigma,
        n_channels=n_channels,
        relative_sd=max(1.3 / float(np.sqrt(2.0 * degrees)), _LEAST_RELATIVE_SD),
        n_voxels=n_voxels,
        remark="residuals of echoes with high signal, median over pairs of voxels",
    )


def bright_triplets(stack: EchoStack) -> Array:
    """Squares of two partners and the voxel between, all bright; shape (3, V, E), middle second."""
    volume = stack.magnitude[:, :, stack.complete_slices]
    finite = np.isfinite(volume).all(axis=-1)
    if not finite.any():
        return np.empty((3, 0, stack.n_echoes))
    first = volume[..., 0]
    bright = finite & (first > _BRIGHT_SHARE * np.percentile(first[finite], 99.0))
    found, half = [], _PARTNER // 2
    for axis in (0, 1):
        along, rows = np.moveaxis(bright, axis, 0), np.moveaxis(volume, axis, 0)
        starts = np.argwhere(along[:-_PARTNER] & along[half:-half] & along[_PARTNER:])
        thinned = np.linspace(0, len(starts) - 1, min(len(starts), _MOST_VOXELS // 2)).astype(int)
        i, j, k = starts[thinned].T
        found.append(np.stack([rows[i + step, j, k] for step in (0, half, _PARTNER)]))
    triplets = np.concatenate(found, axis=1).astype(np.float64)
    ratio = triplets[0, :, 0] / triplets[2, :, 0]
    return triplets[:, (ratio < _ALIKE) & (ratio > 1.0 / _ALIKE)] ** 2


def _weighted_rss(
    one: Array, other: Array, times_ms: Array, kept: NDArray[np.int64], noise_power: float
) -> Array:
    """Weighted residual sum of squares of ``ln(A1 / A2)`` over the first `kept` echoes of each row.

    Both are A² with noise; with n channels ln A has the variance ``sigma² (A² + n sigma²) / A⁴``.
    """
    used = np.arange(one.shape[1]) < kept[:, None]
    p, q = np.where(used, one, 1.0), np.where(used, other, 1.0)
    w = np.where(used, 1.0 / ((p + noise_power) / p**2 + (q + noise_power) / q**2), 0.0)
    y, t = 0.5 * np.log(p / q), times_ms[None, :]
    total = w.sum(axis=1, keepdims=True)
    mean_t = (w * t).sum(axis=1, keepdims=True) / total
    mean_y = (w * y).sum(axis=1, keepdims=True) / total
    dt, dy = t - mean_t, y - mean_y
    slope = (w * dt * dy).sum(axis=1, keepdims=True) / (w * dt**2).sum(axis=1, keepdims=True)
    return np.asarray((w * (dy - slope * dt) ** 2).sum(axis=1))


def _closed(remark: str, n_voxels: int = 0) -> NoiseCandidate:
    return NoiseCandidate(
        method="residual", sigma=None, n_channels=1, relative_sd=None, n_voxels=n_voxels,
        remark=remark,
    )  # fmt: skip
