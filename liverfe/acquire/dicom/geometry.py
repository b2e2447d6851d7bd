"""Where images lie: which belong to one stack of slices, and the grid that they make.

Positions are projected on the slice normal; file names, instance numbers and slice locations are
not looked at. DICOM's LPS+ becomes RAS+; array axes are column, row, slice.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.acquire.dicom.header import ImageHeader
from liverfe.grid import Grid

_SAME_DIRECTION = 1e-3
"""Direction cosines that differ by less are the same: rounding of decimal text."""

_SAME_LENGTH = 1e-3
"""Pixel spacings that differ by a smaller share are the same."""

SAME_PLACE_MM = 0.1
"""Slices nearer than this are one slice: a tenth of the thinnest slice in use."""

_MULTIPLE_TOLERANCE = 0.1
"""A gap this close (share) to a whole multiple of the slice distance means missing slices."""

LPS_TO_RAS = np.diag([-1.0, -1.0, 1.0, 1.0])


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Slices:
    """The slice places of one stack.

    Attributes
    ----------
    places_mm : tuple of float
        Positions along the normal, ascending; missing slices of an otherwise even stack included.
    worst_shift_mm : float
        How far a slice lies from where an even stack would have it.
    """

    places_mm: tuple[float, ...]
    worst_shift_mm: float


def normal(orientation: Sequence[float]) -> NDArray[np.float64]:
    """Unit vector across the slices, LPS+: row direction cross column direction."""
    cross = np.cross(orientation[:3], orientation[3:])
    return np.asarray(cross / np.linalg.norm(cross))


def is_plane(orientation: Sequence[float]) -> bool:
    """Tell whether six cosines are two unit vectors at right angles."""
    row, column = np.array(orientation[:3]), np.array(orientation[3:])
    return bool(
        abs(np.linalg.norm(row) - 1) < 0.01
        and abs(np.linalg.norm(column) - 1) < 0.01
        and abs(row @ column) < 0.01
    )


def is_same_plane(a: ImageHeader, b: ImageHeader) -> bool:
    """Tell whether two images have the same matrix, spacing and orientation."""
    if (a.pixels.rows, a.pixels.columns) != (b.pixels.rows, b.pixels.columns):
        return False
    if a.orientation is None or b.orientation is None or not a.spacing_mm or not b.spacing_mm:
        return False
    turned = max(abs(p - q) for p, q in zip(a.orientation, b.orientation, strict=True))
    stretched = max(abs(p / q - 1) for p, q in zip(a.spacing_mm, b.spacing_mm, strict=True))
    return turned < _SAME_DIRECTION and stretched < _SAME_LENGTH


def places(images: Sequence[ImageHeader]) -> NDArray[np.float64]:
    """Project the positions of images of one orientation on their normal.

    Returns
    -------
    ndarray of float64, shape (N, 3)
        Along the normal, along the row and along the column direction, mm.
    """
    orientation = images[0].orientation
    assert orientation is not None
    axes = np.stack([normal(orientation), orientation[:3], orientation[3:]], axis=1)
    return np.asarray(np.array([image.position_mm for image in images], dtype=np.float64) @ axes)


def cluster(values: Iterable[float], tolerance: float) -> list[float]:
    """Merge values that lie within `tolerance` of their neighbour; ascending centres."""
    ordered = sorted(set(values))
    groups: list[list[float]] = []
    for value in ordered:
        if groups and value - groups[-1][-1] <= tolerance:
            groups[-1].append(value)
        else:
            groups.append([value])
    return [group[len(group) // 2] for group in groups]


def is_one_line(images: Sequence[ImageHeader]) -> bool:
    """Tell whether the corners of all images lie on one straight line through the slices."""
    found = places(images)
    if len(images) < 2 or np.ptp(found[:, 0]) < SAME_PLACE_MM:
        return bool(np.ptp(found[:, 1:], axis=0).max() < SAME_PLACE_MM)
    design = np.stack([found[:, 0], np.ones(len(found))], axis=1)
    solution, *_ = np.linalg.lstsq(design, found[:, 1:], rcond=None)
    return bool(np.abs(found[:, 1:] - design @ solution).max() < SAME_PLACE_MM)


def settle_slices(found: Sequence[float]) -> Slices:
    """Settle the slice places of a stack, with places for slices that are missing altogether.

    Parameters
    ----------
    found : sequence of float
        Distinct positions along the normal, ascending.

    Returns
    -------
    Slices
        With ``worst_shift_mm`` above zero where the distances are uneven.
    """
    where = np.array(found, dtype=np.float64)
    if len(where) < 3:
        return Slices(places_mm=tuple(where), worst_shift_mm=0.0)
    gaps = np.diff(where)
    step = float(np.median(gaps[gaps < 1.5 * gaps.min()]))
    multiples = np.rint(gaps / step)
    is_regular = bool((np.abs(gaps / step - multiples) < _MULTIPLE_TOLERANCE).all())
    if is_regular and multiples.max() > 1:
        filled: list[float] = [float(where[0])]
        for gap, n in zip(gaps, multiples.astype(int), strict=True):
            start = filled[-1]
            filled += [start + gap * (i + 1) / n for i in range(n)]
        where = np.array(filled)
    even = np.linspace(where[0], where[-1], len(where))
    return Slices(
        places_mm=tuple(float(place) for place in where),
        worst_shift_mm=float(np.abs(where - even).max()),
    )


def grid_of(images: Sequence[ImageHeader], slices: Slices) -> Grid | None:
    """Make the grid of a stack from positions, orientation and pixel spacing.

    Parameters
    ----------
    images : sequence of ImageHeader
        Of one orientation, matrix and spacing.
    slices : Slices
        Where the slices lie.

    Returns
    -------
    Grid or None
        RAS+; None where a single slice states no thickness and no spacing.
    """
    first = images[0]
    assert first.orientation is not None
    assert first.spacing_mm is not None
    found = places(images)
    low, high = int(np.argmin(found[:, 0])), int(np.argmax(found[:, 0]))
    start = np.array(images[low].position_mm, dtype=np.float64)
    n_slices = len(slices.places_mm)
    if n_slices > 1:
        step = (np.array(images[high].position_mm) - start) / (n_slices - 1)
    else:
        spacing = first.slice_spacing_mm or first.slice_thickness_mm
        if not spacing or spacing <= 0:
            return None
        step = normal(first.orientation) * spacing
    affine = np.eye(4)
    affine[:3, 0] = np.array(first.orientation[:3]) * first.spacing_mm[1]
    affine[:3, 1] = np.array(first.orientation[3:]) * first.spacing_mm[0]
    affine[:3, 2] = step
    affine[:3, 3] = start
    return Grid(
        shape=(first.pixels.columns, first.pixels.rows, n_slices),
        affine_mm=LPS_TO_RAS @ affine,
        slice_thickness_mm=first.slice_thickness_mm,
        frame_of_reference_uid=first.frame_of_reference,
    )
