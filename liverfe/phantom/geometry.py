"""From a recipe's geometry to a `Grid`, laid out as DICOM counts: columns, rows, slices."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from liverfe.grid import Grid
from liverfe.phantom.recipe import GeometryPlan

__all__ = ["grid_of"]


def grid_of(plan: GeometryPlan) -> Grid:
    """Lay out the grid of a recipe.

    Parameters
    ----------
    plan : GeometryPlan
        Sizes, distances, centre and turn.

    Returns
    -------
    Grid
        Shape (columns, rows, slices). Unturned, the first index runs to the patient's left, the
        second to the back, the third to the head.
    """
    shape = (plan.columns, plan.rows, plan.slices)
    size_mm = (*plan.pixel_size_mm, plan.slice_spacing_mm)
    axial = np.diag([-1.0, -1.0, 1.0])
    steps = _turn(plan.oblique_axis, plan.oblique_angle_deg) @ axial @ np.diag(size_mm)
    affine = np.eye(4)
    affine[:3, :3] = steps
    affine[:3, 3] = plan.centre_mm - steps @ ((np.array(shape) - 1) / 2)
    return Grid(shape=shape, affine_mm=affine, slice_thickness_mm=plan.slice_thickness_mm)


def _turn(axis: str, angle_deg: float) -> NDArray[np.float64]:
    """Rotation matrix about a patient axis, right-handed."""
    cosine, sine = math.cos(math.radians(angle_deg)), math.sin(math.radians(angle_deg))
    first, second = {"x": (1, 2), "y": (2, 0), "z": (0, 1)}[axis]
    matrix = np.eye(3)
    matrix[first, first] = matrix[second, second] = cosine
    matrix[first, second], matrix[second, first] = -sine, sine
    return matrix
