"""Regions are valid once born, and locked."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.grid import Grid
from liverfe.outlines import LabelMask, Outline, Region

TRIANGLE = np.array([[0.0, 0, 0], [10, 0, 0], [0, 10, 0]])
GRID = Grid(shape=(2, 3, 4), affine_mm=np.eye(4))


@pytest.mark.parametrize(
    "points", [TRIANGLE[:2], TRIANGLE[:, :2], TRIANGLE * np.nan, TRIANGLE + np.inf, np.zeros(3)]
)
def test_an_outline_needs_three_finite_corners(points: np.ndarray) -> None:
    with pytest.raises(ValueError, match="corners"):
        Outline(points_mm=points)


def test_an_outline_includes_or_excludes() -> None:
    with pytest.raises(ValueError, match="include or exclude"):
        Outline(points_mm=TRIANGLE, role="both")  # type: ignore[arg-type]


def test_a_region_has_a_printable_name_and_something_inside() -> None:
    hole = Outline(points_mm=TRIANGLE, role="exclude")
    whole = Outline(points_mm=TRIANGLE)
    with pytest.raises(ValueError, match="role include"):
        Region(name="liver", organ="liver", shape=(hole,))
    with pytest.raises(ValueError, match="role include"):
        Region(name="liver", organ="liver", shape=())
    with pytest.raises(ValueError, match="needs a name"):
        Region(name=" \t\x07\n", organ="liver", shape=(whole,))
    named = Region(name="right\x1b[31m lobe\n ", organ="liver", shape=(whole, hole))
    assert named.name == "right[31m lobe"


def test_a_mask_must_fit_its_grid() -> None:
    with pytest.raises(ValueError, match="mask of shape"):
        LabelMask(mask=np.ones((2, 3, 5), dtype=bool), grid=GRID)


def test_shapes_are_locked_copies() -> None:
    points, mask = TRIANGLE.copy(), np.ones((2, 3, 4), dtype=bool)
    outline, label = Outline(points_mm=points), LabelMask(mask=mask, grid=GRID)
    points[0] = 99.0
    mask[0] = False
    np.testing.assert_array_equal(outline.points_mm, TRIANGLE)
    assert label.mask.all()
    for locked in (outline.points_mm, label.mask):
        with pytest.raises(ValueError, match="read-only"):
            locked[0] = 0
