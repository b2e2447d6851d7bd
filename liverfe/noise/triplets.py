"""Triplets of bright voxels in a row: two partners that decay alike, and one between them.

The partners are compared with each other, so that what is common to both (their decay, fat, a
second kind of tissue) cancels; the one between says which echoes count, so that no voxel is chosen
by its own noise.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack

_BRIGHT_SHARE = 0.3
"""Voxels brighter at the first echo than this share of the brightest percent are tissue."""
_DISTANCES = (4, 6, 8)
"""Partners lie this many voxels apart along a row or column: near enough to decay alike, and so
chosen that zero-filling leaves no correlation of noise between them on the average: it is
sinc(d / f) for images f times as fine as acquired, 0 for f = 1 and 2, below 0.04 for f up to 3."""
_ALIKE = 1.5
"""Partners differ by less than this factor at the first echo: they lie in one tissue."""
_MOST_TRIPLETS = 12_000
_GOLDEN = (5.0**0.5 - 1.0) / 2.0

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Triplets:
    """V triplets of voxels.

    Attributes
    ----------
    square : ndarray of float64, shape (3, V, E)
        Squares of the magnitudes: a partner, the voxel between, the other partner.
    where : ndarray of int64, shape (V, 3)
        Indices of the voxel between.
    times_ms : ndarray of float64, shape (E,)
        Echo times.
    """

    square: Array
    where: NDArray[np.int64]
    times_ms: Array

    def __len__(self) -> int:
        return int(self.square.shape[1])

    def in_units_of(self, relative_sigma: NDArray[np.float32] | None) -> Triplets:
        """The same triplets with sigma taken out as far as it varies over the image."""
        if relative_sigma is None:
            return self
        x, y, z = self.where.T
        scale = relative_sigma[x, y, z].astype(np.float64)
        return Triplets(
            square=self.square / scale[:, None] ** 2, where=self.where, times_ms=self.times_ms
        )


def bright_triplets(stack: EchoStack) -> Triplets:
    """Find triplets in all tissue, evenly thinned where there are more than needed.

    Parameters
    ----------
    stack : EchoStack
        Magnitudes in true values.

    Returns
    -------
    Triplets
        Of slices with all echoes; none where no voxel has neighbours that are as bright.
    """
    slices = np.flatnonzero(stack.complete_slices)
    is_whole = len(slices) == stack.grid.shape[2]  # then a view does
    volume = stack.magnitude if is_whole else stack.magnitude[:, :, slices]
    bright = _bright(volume[..., 0])
    squares, places = [np.empty((3, 0, stack.n_echoes))], [np.empty((0, 3), dtype=np.int64)]
    starts = np.argwhere(bright)
    ways = [(axis, distance) for distance in _DISTANCES for axis in (0, 1)]
    for turn, (axis, distance) in enumerate(ways):
        # More are tried than wanted: near its edge a tissue has no partner.
        first = starts[_spread(len(starts), 2 * _MOST_TRIPLETS // len(ways), turn)]
        first = first[first[:, axis] + distance < bright.shape[axis]]
        step = np.eye(3, dtype=np.int64)[axis]
        rows = [tuple((first + reach * step).T) for reach in (0, distance // 2, distance)]
        one, other = volume[..., 0][rows[0]], volume[..., 0][rows[2]]
        alike = (one < _ALIKE * other) & (other < _ALIKE * one)
        alike &= bright[rows[1]] & bright[rows[2]]
        chosen = np.flatnonzero(alike)
        chosen = chosen[_spread(len(chosen), _MOST_TRIPLETS // len(ways), turn)]
        squares.append(
            np.stack([volume[tuple(i[chosen] for i in row)] for row in rows]).astype(float) ** 2
        )
        places.append(np.stack(rows[1], axis=1)[chosen])
    square, where = np.concatenate(squares, axis=1), np.concatenate(places)
    known = np.isfinite(square).all(axis=(0, 2))
    where[:, 2] = slices[where[:, 2]]
    return Triplets(square=square[:, known], where=where[known], times_ms=stack.echo_times_ms)


def _bright(first: NDArray[np.float32]) -> NDArray[np.bool_]:
    finite = np.isfinite(first)
    if not finite.any():
        return finite
    with np.errstate(invalid="ignore"):
        return np.asarray(first > _BRIGHT_SHARE * np.percentile(first[finite], 99.0)) & finite


def _spread(n: int, wanted: int, turn: int) -> NDArray[np.int64]:
    """At most `wanted` of ``range(n)``, spread evenly and without a period: multiples of the golden
    ratio, so that no slice or column is favoured."""
    if n <= wanted:
        return np.arange(n)
    k = np.arange(wanted) + turn * wanted
    return np.asarray(np.mod(k * _GOLDEN, 1.0) * n).astype(np.int64)
