"""Analytic solids in patient millimetres, tested for whole grids at once."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.grid import Grid

__all__ = ["Coordinates", "Ellipsoid", "Tube", "coordinates_mm"]

Coordinates = tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]
"""Right, anterior and superior millimetres of voxel centres, in shapes that broadcast together."""


def coordinates_mm(grid: Grid) -> Coordinates:
    """Find the patient coordinates of all voxel centres of `grid`.

    Parameters
    ----------
    grid : Grid
        Any orientation.

    Returns
    -------
    tuple of ndarray of float64
        RAS+ millimetres. The shapes broadcast to `grid.shape`; a coordinate that is constant
        along an axis of an unturned grid has size 1 there, which makes solids cheap.
    """
    steps = np.ogrid[tuple(slice(size) for size in grid.shape)]
    affine = grid.affine_mm
    x, y, z = (
        sum(
            (affine[row, axis] * steps[axis] for axis in range(3) if affine[row, axis] != 0.0),
            np.full((1, 1, 1), affine[row, 3]),
        )
        for row in range(3)
    )
    return x, y, z


@dataclass(frozen=True, slots=True, kw_only=True)
class Ellipsoid:
    """An ellipsoid, turned about the body's long axis; with an endless radius, a cylinder.

    Attributes
    ----------
    centre_mm : tuple of float
        RAS+ millimetres.
    radii_mm : tuple of float
        Half axes; the third may be infinite.
    turn_deg : float
        Turn about +z (superior), from right to anterior.
    power : float
        Exponent in sum |u/a|^power <= 1: 2 is an ellipsoid, more is boxier.
    """

    centre_mm: tuple[float, float, float]
    radii_mm: tuple[float, float, float]
    turn_deg: float = 0.0
    power: float = 2.0

    def contains(self, at: Coordinates) -> NDArray[np.bool_]:
        """Tell which points lie inside.

        Parameters
        ----------
        at : Coordinates
            From `coordinates_mm`.

        Returns
        -------
        ndarray of bool
            In the shape that the coordinates broadcast to (size 1 where nothing varies).
        """
        x, y, z = (axis - centre for axis, centre in zip(at, self.centre_mm, strict=True))
        cosine, sine = math.cos(math.radians(self.turn_deg)), math.sin(math.radians(self.turn_deg))
        across, along, height = self.radii_mm
        level = self._term((x * cosine + y * sine) / across)
        level = level + self._term((y * cosine - x * sine) / along)
        if math.isfinite(height):
            level = level + self._term(z / height)
        return np.asarray(level <= 1.0)

    def _term(self, ratio: NDArray[np.float64]) -> NDArray[np.float64]:
        return np.square(ratio) if self.power == 2.0 else np.abs(ratio) ** self.power


@dataclass(frozen=True, slots=True, kw_only=True)
class Tube:
    """A straight tube with round ends whose radius changes evenly from start to end: a vessel.

    Attributes
    ----------
    start_mm, end_mm : tuple of float
        Ends of its axis, RAS+ millimetres.
    start_radius_mm, end_radius_mm : float
        Radius at either end.
    """

    start_mm: tuple[float, float, float]
    end_mm: tuple[float, float, float]
    start_radius_mm: float
    end_radius_mm: float

    def contains(self, at: Coordinates) -> NDArray[np.bool_]:
        """Tell which points lie inside; as `Ellipsoid.contains`."""
        axis = np.subtract(self.end_mm, self.start_mm)
        offset = [here - start for here, start in zip(at, self.start_mm, strict=True)]
        along = sum(part * step for part, step in zip(offset, axis, strict=True)) / (axis @ axis)
        along = np.clip(along, 0.0, 1.0)
        distance2 = sum(
            np.square(part - along * step) for part, step in zip(offset, axis, strict=True)
        )
        radius = self.start_radius_mm + along * (self.end_radius_mm - self.start_radius_mm)
        return np.asarray(distance2 <= np.square(radius))
