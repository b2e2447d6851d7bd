"""Where voxels lie, against nibabel and against boxes that can be measured by hand."""

from __future__ import annotations

import nibabel as nib
import numpy as np
import pytest

from liverfe.grid import Grid

OBLIQUE = nib.affines.from_matvec(
    np.array([[-1.2, 0.1, 0.3], [0.05, -1.3, 0.8], [0.2, 0.4, 8.7]]), [90.0, 60.0, -40.0]
)


def test_indices_become_the_millimetres_that_nibabel_gives() -> None:
    grid = Grid(shape=(5, 6, 7), affine_mm=OBLIQUE)
    indices = np.array([[0, 0, 0], [4, 5, 6], [1.5, 2.5, 0.25]])
    expected = nib.affines.apply_affine(OBLIQUE, indices)
    np.testing.assert_allclose(grid.to_mm(indices), expected, atol=1e-12)
    np.testing.assert_allclose(grid.to_indices(expected), indices, atol=1e-12)


def test_voxel_sizes_are_those_that_nibabel_finds() -> None:
    grid = Grid(shape=(5, 6, 7), affine_mm=OBLIQUE)
    assert grid.voxel_size_mm == pytest.approx(tuple(nib.affines.voxel_sizes(OBLIQUE)))


def test_a_box_of_2_by_3_by_5_mm_holds_30_microlitres() -> None:
    grid = Grid(shape=(1, 1, 1), affine_mm=np.diag([-2.0, 3.0, 5.0, 1.0]))
    assert grid.voxel_volume_ml == pytest.approx(0.030)
    assert grid.slice_normal.tolist() == [0.0, 0.0, -1.0]


@pytest.mark.parametrize(
    ("shape", "affine_mm"),
    [
        ((0, 4, 4), np.eye(4)),
        ((4, 4), np.eye(4)),
        ((4, 4, 4), np.eye(3)),
        ((4, 4, 4), np.diag([1.0, 1.0, 0.0, 1.0])),
        ((4, 4, 4), np.diag([1.0, np.nan, 1.0, 1.0])),
    ],
)
def test_a_grid_that_cannot_be_is_not_born(
    shape: tuple[int, int, int], affine_mm: np.ndarray
) -> None:
    with pytest.raises(ValueError, match=r"grid has three sizes|affine_mm"):
        Grid(shape=shape, affine_mm=affine_mm)


def test_the_affine_is_a_locked_copy() -> None:
    given = np.eye(4)
    grid = Grid(shape=(2, 2, 2), affine_mm=given)
    given[0, 3] = 99.0
    assert grid.affine_mm[0, 3] == 0.0
    with pytest.raises(ValueError, match="read-only"):
        grid.affine_mm[0, 3] = 1.0


@pytest.mark.parametrize(
    ("shift_mm", "shape", "same"),
    [(0.005, (9, 9, 9), True), (0.02, (9, 9, 9), False), (0.0, (9, 9, 8), False)],
)
def test_the_same_place_means_corners_within_a_hundredth_of_a_millimetre(
    shift_mm: float, shape: tuple[int, int, int], same: bool
) -> None:
    moved = OBLIQUE.copy()
    moved[2, 3] += shift_mm
    here = Grid(shape=(9, 9, 9), affine_mm=OBLIQUE)
    assert here.is_same_place_as(Grid(shape=shape, affine_mm=moved)) is same
