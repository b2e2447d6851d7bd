"""From a region in the patient to voxels of a grid: done once, here, for every reader."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from skimage.draw import polygon2mask

from liverfe.grid import Grid
from liverfe.outlines.region import LabelMask, Outline, Region

_IN_PLANE_TOLERANCE = 0.25
"""A corner may lie this many slices off the plane of its outline; more, and it is not planar. The
plane itself belongs to the slice that it lies nearest to."""


def rasterise(region: Region, grid: Grid) -> NDArray[np.bool_]:
    """Find the voxels of `grid` whose centres lie inside `region`.

    Parameters
    ----------
    region : Region
        Outlines or a label mask, in patient space.
    grid : Grid
        The voxels to choose from.

    Returns
    -------
    ndarray of bool, shape (X, Y, Z)
        True inside. All False where the region lies outside the grid.

    Raises
    ------
    ValueError
        If an outline is not planar on a slice of the grid.

    Notes
    -----
    A label mask on another grid is sampled at each voxel centre of `grid` (nearest neighbour, by
    the two affines). Include outlines of a slice are joined, then exclude outlines are cut out.
    """
    if isinstance(region.shape, LabelMask):
        return _resample(region.shape, grid)
    return _fill(region.shape, grid, region.name)


def _resample(label: LabelMask, grid: Grid) -> NDArray[np.bool_]:
    if label.grid.is_same_place_as(grid):
        return np.array(label.mask)
    inside = np.zeros(grid.shape, dtype=bool)
    plane = np.stack(np.meshgrid(*map(np.arange, grid.shape[:2]), indexing="ij"), axis=-1)
    sizes = np.array(label.grid.shape)
    for k in range(grid.shape[2]):
        indices = np.concatenate([plane, np.full((*grid.shape[:2], 1), k)], axis=-1)
        nearest = np.rint(label.grid.to_indices(grid.to_mm(indices))).astype(np.int64)
        valid = ((nearest >= 0) & (nearest < sizes)).all(axis=-1)
        i, j, m = np.moveaxis(nearest[valid], -1, 0)
        inside[..., k][valid] = label.mask[i, j, m]
    return inside


def _fill(outlines: tuple[Outline, ...], grid: Grid, name: str) -> NDArray[np.bool_]:
    inside = np.zeros(grid.shape, dtype=bool)
    for role in ("include", "exclude"):
        for outline in outlines:
            if outline.role != role:
                continue
            # Rounded, so that no digit of the affine decides on a voxel centre on the very edge.
            corners = np.round(grid.to_indices(outline.points_mm), 6)
            k = int(np.rint(np.median(corners[:, 2])))
            if np.abs(corners[:, 2] - np.median(corners[:, 2])).max() > _IN_PLANE_TOLERANCE:
                raise ValueError(f"region {name!r}: an outline does not lie in one slice")
            if 0 <= k < grid.shape[2]:
                filled = polygon2mask(grid.shape[:2], corners[:, :2])
                inside[..., k] = (
                    inside[..., k] | filled if role == "include" else inside[..., k] & ~filled
                )
    return inside
