"""The regions that come with a phantom: a label image, and outlines in patient millimetres."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import distance_transform_edt
from skimage.measure import find_contours

from liverfe.errors import UsageError
from liverfe.grid import Grid
from liverfe.phantom.abdomen import StructureMap
from liverfe.phantom.recipe import Recipe

__all__ = ["draw_regions", "outline_document"]

_COORDINATE_DIGITS = 4
"""Outline corners are written to 0.1 micrometre: the file repeats, and no corner moves."""


def draw_regions(recipe: Recipe, structures: StructureMap, grid: Grid) -> NDArray[np.uint8]:
    """Draw a recipe's regions, as a careful reader would: inside, with a margin.

    Parameters
    ----------
    recipe : Recipe
        Names, structures and margins.
    structures : StructureMap
        What each voxel is.
    grid : Grid
        Of the images.

    Returns
    -------
    ndarray of uint8, shape (X, Y, Z)
        Label 1, 2, ... in the recipe's order, 0 elsewhere. Where regions meet, the earlier stays.

    Raises
    ------
    UsageError
        If a region holds no voxel.
    """
    labels = np.zeros(grid.shape, dtype=np.uint8)
    for label, plan in enumerate(recipe.regions, start=1):
        inside = structures.mask(plan.structures)
        if plan.margin_mm > 0.0:
            inside = _shrink(inside, plan.margin_mm, grid.voxel_size_mm[:2])
        inside &= labels == 0
        if not inside.any():
            raise UsageError(
                f"recipe {recipe.name}: regions[{label - 1}]: {plan.name!r} holds no voxel; "
                "reduce margin_mm or move the slices"
            )
        labels[inside] = label
    return labels


def _shrink(
    inside: NDArray[np.bool_], margin_mm: float, pixel_size_mm: tuple[float, float]
) -> NDArray[np.bool_]:
    """Keep voxels whose centre lies more than the margin from any centre outside, in-plane."""
    kept = np.zeros_like(inside)
    for k in range(inside.shape[2]):
        # A rim of outside, so that a structure cut by the image's edge has a margin there too.
        framed = np.pad(inside[..., k], 1)
        distance = distance_transform_edt(framed, sampling=pixel_size_mm)[1:-1, 1:-1]
        kept[..., k] = distance > margin_mm
    return kept


def outline_document(recipe: Recipe, labels: NDArray[np.uint8], grid: Grid) -> dict[str, Any]:
    """Trace the label image as outlines.

    Parameters
    ----------
    recipe : Recipe
        For the regions' names.
    labels : ndarray of uint8, shape (X, Y, Z)
        From `draw_regions`.
    grid : Grid
        Of the labels.

    Returns
    -------
    dict
        The outline file's content, schema 1: for each region its outlines in RAS+ millimetres,
        one slice each; holes have the role ``exclude``.
    """
    return {
        "schema": 1,
        "kind": "liverfe outlines",
        "space": "patient RAS+ mm",
        "regions": [
            {
                "name": plan.name,
                "outlines": [
                    outline
                    for k in range(grid.shape[2])
                    for outline in _trace(labels[..., k] == label, k, grid)
                ],
            }
            for label, plan in enumerate(recipe.regions, start=1)
        ],
    }


def _trace(inside: NDArray[np.bool_], k: int, grid: Grid) -> list[dict[str, Any]]:
    framed = np.pad(inside.astype(np.float64), 1)
    outlines = []
    for contour in find_contours(framed, 0.5, fully_connected="low"):
        corners = _without_straight_corners(contour[:-1] - 1.0)
        # Contours keep lower values on their left, so a rim runs clockwise and a hole does not.
        role = "include" if _signed_area(corners) < 0.0 else "exclude"
        indices = np.column_stack([corners, np.full(len(corners), float(k))])
        points_mm = np.round(grid.to_mm(indices), _COORDINATE_DIGITS) + 0.0
        outlines.append({"role": role, "points_mm": points_mm.tolist()})
    return outlines


def _without_straight_corners(corners: NDArray[np.float64]) -> NDArray[np.float64]:
    before, after = np.roll(corners, 1, axis=0), np.roll(corners, -1, axis=0)
    first, second = corners - before, after - corners
    bend = first[:, 0] * second[:, 1] - first[:, 1] * second[:, 0]
    return corners[np.abs(bend) > 1e-9]


def _signed_area(corners: NDArray[np.float64]) -> float:
    x, y = corners.T
    return float(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1)) / 2)
