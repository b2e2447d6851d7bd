"""How a slice is laid on paper: by radiological convention, read from the affine.

The reader faces the patient: the patient's right is on the left of an axial or coronal picture, and
anterior (axial) or superior (coronal, sagittal) is on top; a sagittal picture has anterior on its
left. Whatever order, direction or tilt the array's axes have, the nearest anatomical axes decide.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.grid import Grid

_LETTERS = (("L", "R"), ("P", "A"), ("I", "S"))
"""Letters of the negative and the positive end of the RAS+ axes x, y and z."""

_RIGHT_AND_DOWN = {
    0: (np.array([0.0, -1.0, 0.0]), np.array([0.0, 0.0, -1.0])),
    1: (np.array([-1.0, 0.0, 0.0]), np.array([0.0, 0.0, -1.0])),
    2: (np.array([-1.0, 0.0, 0.0]), np.array([0.0, -1.0, 0.0])),
}
"""RAS+ directions that run to the right and down on paper, by the axis nearest the slice normal
(0 sagittal, 1 coronal, 2 axial)."""


@dataclass(frozen=True, slots=True, kw_only=True)
class SliceView:
    """How the slices of one grid are turned for display.

    Attributes
    ----------
    plane : {'sagittal', 'coronal', 'axial'}
        The anatomical plane nearest to the slices.
    transposed : bool
        Whether array axis Y runs across the page (and X down it).
    flip_across, flip_down : bool
        Whether the axis that runs across, or down, is reversed.
    left, right, top, bottom : str
        Letters of the picture's sides: R, L, A, P, S or I.
    width_mm, height_mm : float
        Size of the whole slice.
    """

    plane: str
    transposed: bool
    flip_across: bool
    flip_down: bool
    left: str
    right: str
    top: str
    bottom: str
    width_mm: float
    height_mm: float

    @classmethod
    def of(cls, grid: Grid) -> SliceView:
        """Read the view of a grid's slices from its affine.

        Parameters
        ----------
        grid : Grid
            Any axis order, direction and tilt.

        Returns
        -------
        SliceView
            By radiological convention.
        """
        normal = int(np.argmax(np.abs(grid.slice_normal)))
        right, down = _RIGHT_AND_DOWN[normal]
        axes = grid.affine_mm[:3, :2] / np.linalg.norm(grid.affine_mm[:3, :2], axis=0)
        straight = abs(axes[:, 0] @ right) + abs(axes[:, 1] @ down)
        crossed = abs(axes[:, 1] @ right) + abs(axes[:, 0] @ down)
        transposed = bool(crossed > straight)
        across_axis, down_axis = (1, 0) if transposed else (0, 1)
        size_mm = [n * mm for n, mm in zip(grid.shape, grid.voxel_size_mm, strict=True)]
        return cls(
            plane=("sagittal", "coronal", "axial")[normal],
            transposed=transposed,
            flip_across=bool(axes[:, across_axis] @ right < 0),
            flip_down=bool(axes[:, down_axis] @ down < 0),
            left=_letter(-right),
            right=_letter(right),
            top=_letter(-down),
            bottom=_letter(down),
            width_mm=size_mm[across_axis],
            height_mm=size_mm[down_axis],
        )

    def on_paper(self, plane: NDArray[np.generic]) -> NDArray[np.generic]:
        """Turn one slice for display.

        Parameters
        ----------
        plane : ndarray, shape (X, Y)
            Values of one slice.

        Returns
        -------
        ndarray, shape (rows, columns)
            First row on top, first column on the left.
        """
        rows = plane if self.transposed else plane.T
        rows = rows[::-1] if self.flip_down else rows
        return rows[:, ::-1] if self.flip_across else rows


def _letter(direction: NDArray[np.float64]) -> str:
    axis = int(np.argmax(np.abs(direction)))
    return _LETTERS[axis][int(direction[axis] > 0)]
