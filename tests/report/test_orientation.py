"""The patient's right is on the left of the page, whatever the array's axes are."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from liverfe.grid import Grid
from liverfe.report.orientation import SliceView

_SHAPE = (7, 9, 5)

_EVERY_AXIS_ORDER = [
    (order, signs)
    for order in itertools.permutations(range(3))
    for signs in itertools.product((1.0, -1.0), repeat=3)
]
"""All 48 ways in which array axes can lie along the patient's."""

_PAPER = {
    # Radiological convention: paper's right and down as RAS+ axis and sign, by the slice's axis.
    2: ((0, -1), (1, -1)),
    1: ((0, -1), (2, -1)),
    0: ((1, -1), (2, -1)),
}
_ENDS = {(0, 1): "R", (0, -1): "L", (1, 1): "A", (1, -1): "P", (2, 1): "S", (2, -1): "I"}


def grid_along(order: tuple[int, ...], signs: tuple[float, ...], tilt: float = 0.0) -> Grid:
    """A grid whose array axis i runs along RAS+ axis order[i], tilted about an oblique axis."""
    affine = np.zeros((4, 4))
    affine[3, 3] = 1.0
    for column, (axis, sign, size) in enumerate(zip(order, signs, (1.5, 2.0, 6.0), strict=True)):
        affine[axis, column] = sign * size
    axis = np.array([1.0, 2.0, -1.0]) / np.sqrt(6.0)
    cross = np.array([[0, -axis[2], axis[1]], [axis[2], 0, -axis[0]], [-axis[1], axis[0], 0]])
    # Rodrigues' formula: a turn by `tilt` radians about `axis`.
    turn = np.eye(3) + np.sin(tilt) * cross + (1 - np.cos(tilt)) * cross @ cross
    affine[:3, :3] = turn @ affine[:3, :3]
    return Grid(shape=_SHAPE, affine_mm=affine)


@pytest.mark.parametrize("tilt", [0.0, 0.3], ids=["straight", "oblique"])
@pytest.mark.parametrize(("order", "signs"), _EVERY_AXIS_ORDER)
def test_a_marked_corner_lies_where_the_convention_puts_it(
    order: tuple[int, ...], signs: tuple[float, ...], tilt: float
) -> None:
    grid = grid_along(order, signs, tilt)
    view = SliceView.of(grid)
    (right_axis, right_sign), (down_axis, down_sign) = _PAPER[order[2]]

    # Mark the voxel furthest to the paper's left and top, by its place in the patient.
    plane = np.stack(np.meshgrid(*map(np.arange, _SHAPE[:2]), indexing="ij"), axis=-1)
    indices = np.concatenate([plane, np.zeros((*_SHAPE[:2], 1))], axis=-1)
    straight = grid_along(order, signs)
    places = straight.to_mm(indices)
    score = -right_sign * places[..., right_axis] - down_sign * places[..., down_axis]
    marked = score == score.max()

    assert view.on_paper(marked)[0, 0]
    assert view.on_paper(marked).sum() == 1
    assert view.left == _ENDS[right_axis, -right_sign]
    assert view.right == _ENDS[right_axis, right_sign]
    assert view.top == _ENDS[down_axis, -down_sign]
    assert view.bottom == _ENDS[down_axis, down_sign]
    assert view.plane == {2: "axial", 1: "coronal", 0: "sagittal"}[order[2]]


@pytest.mark.parametrize(("order", "signs"), _EVERY_AXIS_ORDER)
def test_picture_has_the_size_of_the_slice(
    order: tuple[int, ...], signs: tuple[float, ...]
) -> None:
    view = SliceView.of(grid_along(order, signs))
    rows, columns = view.on_paper(np.zeros(_SHAPE[:2])).shape
    # Array axis X has 7 voxels of 1.5 mm, Y has 9 of 2.0 mm.
    sizes_mm = {7: 10.5, 9: 18.0}
    assert (view.width_mm, view.height_mm) == (sizes_mm[columns], sizes_mm[rows])


def test_an_axial_slice_has_right_on_the_left_and_anterior_on_top() -> None:
    # The usual axial image: columns run to the patient's left, rows to posterior.
    view = SliceView.of(grid_along((0, 1, 2), (-1.0, -1.0, 1.0)))
    assert (view.left, view.right, view.top, view.bottom) == ("R", "L", "A", "P")
    assert (view.transposed, view.flip_across, view.flip_down) == (False, False, False)
