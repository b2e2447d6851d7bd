"""`Region`: what a reader drew, before it meets any voxel."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from liverfe.grid import Grid

Role = Literal["include", "exclude"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Outline:
    """One closed, planar outline.

    Attributes
    ----------
    points_mm : ndarray of float64, shape (N, 3)
        Corners in RAS+ millimetres, N >= 3; the last corner joins the first.
    role : {'include', 'exclude'}
        Whether its inside belongs to the region or is cut out of it.
    """

    points_mm: NDArray[np.float64]
    role: Role = "include"

    def __post_init__(self) -> None:
        points = np.array(self.points_mm, dtype=np.float64, copy=True)
        if points.ndim != 2 or points.shape[1] != 3 or len(points) < 3:
            raise ValueError("an outline needs at least three corners of three coordinates")
        if not np.isfinite(points).all():
            raise ValueError("an outline's corners must be finite")
        if self.role not in ("include", "exclude"):
            raise ValueError(f"an outline's role is include or exclude, not {self.role!r}")
        points.flags.writeable = False
        object.__setattr__(self, "points_mm", points)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LabelMask:
    """The voxels of one label of a label image, on the image's own grid.

    Attributes
    ----------
    mask : ndarray of bool, shape (X, Y, Z)
        True inside the region.
    grid : Grid
        Where those voxels lie in the patient.
    """

    mask: NDArray[np.bool_]
    grid: Grid

    def __post_init__(self) -> None:
        mask = np.array(self.mask, dtype=bool, copy=True)
        if mask.shape != self.grid.shape:
            raise ValueError(f"mask of shape {mask.shape} on a grid of shape {self.grid.shape}")
        mask.flags.writeable = False
        object.__setattr__(self, "mask", mask)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Region:
    """A named region, drawn as outlines or given as a label mask.

    Attributes
    ----------
    name : str
        As the reader gave it, for example ``right lobe``; stripped of control characters.
    organ : str
        ``liver``, or the other organ or tissue that the name says (`organ_from_name`).
    shape : tuple of Outline, or LabelMask
        Where it lies in the patient.
    source : str
        Where it came from, for the report: ``outline file``, ``label image``, ...
    frame_of_reference_uid : str
        DICOM frame of reference that it was drawn on; empty where its source names none.
    """

    name: str
    organ: str
    shape: tuple[Outline, ...] | LabelMask
    source: str = ""
    frame_of_reference_uid: str = ""

    def __post_init__(self) -> None:
        name = "".join(char for char in self.name if char.isprintable()).strip()
        if not name:
            raise ValueError("a region needs a name")
        if isinstance(self.shape, tuple) and not any(o.role == "include" for o in self.shape):
            raise ValueError(f"region {name!r} has no outline with the role include")
        object.__setattr__(self, "name", name)
