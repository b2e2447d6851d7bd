"""`Grid`: where voxels lie in the patient."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from liverfe.units import ml_from_mm3

__all__ = ["Grid"]

_SAME_PLACE_MM = 0.01
"""Two grids whose corners differ by less are the same grid; well under any voxel size."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Grid:
    """A regular lattice of voxels in patient space.

    Attributes
    ----------
    shape : tuple of int
        Number of voxels along X, Y and Z; Z counts slices.
    affine_mm : ndarray of float64, shape (4, 4)
        Maps voxel indices (centres at whole numbers) to RAS+ millimetres: +x is the patient's
        right, +y anterior, +z superior (as in NIfTI).
    slice_thickness_mm : float or None
        Thickness of excitation as the file states it; the spacing of slices is in the affine.
    frame_of_reference_uid : str
        DICOM frame of reference of the millimetres; empty where the source names none.
    """

    shape: tuple[int, int, int]
    affine_mm: NDArray[np.float64]
    slice_thickness_mm: float | None = None
    frame_of_reference_uid: str = ""

    def __post_init__(self) -> None:
        if len(self.shape) != 3 or min(self.shape) < 1:
            raise ValueError(f"a grid has three sizes of at least 1, not {self.shape}")
        affine = np.array(self.affine_mm, dtype=np.float64, copy=True)
        if affine.shape != (4, 4) or not np.isfinite(affine).all():
            raise ValueError("affine_mm must be a finite 4 x 4 matrix")
        if abs(np.linalg.det(affine[:3, :3])) < 1e-9:
            raise ValueError("affine_mm is singular: the voxels have no volume")
        affine.flags.writeable = False
        object.__setattr__(self, "shape", tuple(int(size) for size in self.shape))
        object.__setattr__(self, "affine_mm", affine)

    @property
    def voxel_size_mm(self) -> tuple[float, float, float]:
        """Distance between neighbouring voxel centres along X, Y and Z, in mm."""
        x, y, z = np.linalg.norm(self.affine_mm[:3, :3], axis=0)
        return float(x), float(y), float(z)

    @property
    def voxel_volume_ml(self) -> float:
        """Volume of one voxel, in mL."""
        return ml_from_mm3(float(abs(np.linalg.det(self.affine_mm[:3, :3]))))

    @property
    def slice_normal(self) -> NDArray[np.float64]:
        """Unit vector across the slices (direction of X cross Y), RAS+."""
        normal = np.cross(self.affine_mm[:3, 0], self.affine_mm[:3, 1])
        return np.asarray(normal / np.linalg.norm(normal))

    def to_mm(self, indices: ArrayLike) -> NDArray[np.float64]:
        """Map voxel indices to patient millimetres.

        Parameters
        ----------
        indices : array_like, shape (..., 3)
            Voxel indices; fractions allowed.

        Returns
        -------
        ndarray of float64, shape (..., 3)
            RAS+ millimetres.
        """
        index = np.asarray(indices, dtype=np.float64)
        return np.asarray(index @ self.affine_mm[:3, :3].T + self.affine_mm[:3, 3])

    def to_indices(self, points_mm: ArrayLike) -> NDArray[np.float64]:
        """Map patient millimetres to (fractional) voxel indices.

        Parameters
        ----------
        points_mm : array_like, shape (..., 3)
            RAS+ millimetres.

        Returns
        -------
        ndarray of float64, shape (..., 3)
            Voxel indices.
        """
        point = np.asarray(points_mm, dtype=np.float64)
        inverse = np.linalg.inv(self.affine_mm)
        return np.asarray(point @ inverse[:3, :3].T + inverse[:3, 3])

    def is_same_place_as(self, other: Grid) -> bool:
        """Tell whether `other` has the same shape and its corners at the same places."""
        if self.shape != other.shape:
            return False
        last = np.array(self.shape) - 1
        corners = np.array([[i, j, k] for i in (0, 1) for j in (0, 1) for k in (0, 1)]) * last
        return bool(np.abs(self.to_mm(corners) - other.to_mm(corners)).max() < _SAME_PLACE_MM)
