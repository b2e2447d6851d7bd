"""From regions to voxels, against matplotlib's paths, analytic discs and nibabel's orientations."""

from __future__ import annotations

import nibabel as nib
import numpy as np
import pytest
from matplotlib.path import Path as Polygon
from scipy.spatial.transform import Rotation

from liverfe.grid import Grid
from liverfe.outlines import LabelMask, Outline, Region, rasterise

OBLIQUE = np.eye(4)
OBLIQUE[:3, :3] = Rotation.from_euler("xyz", [12, -25, 8], degrees=True).as_matrix() @ np.diag(
    [1.4, 1.9, 6.0]
)
OBLIQUE[:3, 3] = [-80.0, 40.0, -15.0]
AFFINES = {
    "plain": np.diag([1.5, 1.5, 8.0, 1.0]),
    "flipped": nib.affines.from_matvec(np.diag([-1.5, -2.0, 5.0]), [70, 90, -30]),
    "coronal": nib.affines.from_matvec([[1.5, 0, 0], [0, 0, 7.0], [0, 1.5, 0]], [-40, 3, 9]),
    "oblique": OBLIQUE,
}


def grid_of(affine: np.ndarray, shape: tuple[int, int, int] = (48, 40, 4)) -> Grid:
    return Grid(shape=shape, affine_mm=affine)


def outline(grid: Grid, corners: np.ndarray, k: float, role: str = "include") -> Outline:
    """An outline drawn in voxel indices of slice k, handed over in millimetres."""
    indices = np.column_stack([corners, np.full(len(corners), k)])
    points_mm = nib.affines.apply_affine(grid.affine_mm, indices)
    return Outline(points_mm=points_mm, role=role)  # type: ignore[arg-type]


def region(*shapes: Outline) -> Region:
    return Region(name="drawn", organ="liver", shape=shapes)


def inside_of(corners: np.ndarray, shape: tuple[int, int]) -> np.ndarray:
    centres = np.stack(np.meshgrid(*map(np.arange, shape), indexing="ij"), axis=-1)
    return Polygon(corners).contains_points(centres.reshape(-1, 2)).reshape(shape)


STAR = np.array([[10.4, 8.2], [37.1, 15.4], [22.6, 18.1], [30.2, 33.7], [14.4, 22.9], [5.2, 31.3]])


@pytest.mark.parametrize("name", AFFINES)
def test_an_outline_fills_the_voxels_that_matplotlib_finds(name: str) -> None:
    grid = grid_of(AFFINES[name])
    filled = rasterise(region(outline(grid, STAR, 2)), grid)
    np.testing.assert_array_equal(filled[..., 2], inside_of(STAR, (48, 40)))
    assert not filled[..., [0, 1, 3]].any()


@pytest.mark.parametrize("name", AFFINES)
def test_corners_on_voxel_centres_give_the_same_voxels_on_any_affine(name: str) -> None:
    # A centre on the very edge belongs in or out by one rule, not by the last digit of the affine.
    corners = np.array([[3.0, 3.0], [17.0, 3.0], [24.0, 17.0], [10.0, 31.0], [3.0, 17.0]])
    plain = grid_of(np.eye(4))
    grid = grid_of(AFFINES[name])
    expected = rasterise(region(outline(plain, corners, 1)), plain)
    np.testing.assert_array_equal(rasterise(region(outline(grid, corners, 1)), grid), expected)


@pytest.mark.parametrize("name", AFFINES)
def test_a_circle_has_the_volume_of_its_disc(name: str) -> None:
    grid = grid_of(AFFINES[name])
    turn = np.linspace(0, 2 * np.pi, 200, endpoint=False)
    circle = np.column_stack([23.2 + 12.6 * np.cos(turn), 19.7 + 12.6 * np.sin(turn)])
    filled = rasterise(region(outline(grid, circle, 1)), grid)
    assert filled.sum() == pytest.approx(np.pi * 12.6**2, rel=0.02)
    centre = np.argwhere(filled).mean(axis=0)
    assert centre == pytest.approx([23.2, 19.7, 1], abs=0.1)


def test_includes_are_joined_and_excludes_cut_out_in_any_order() -> None:
    grid = grid_of(AFFINES["oblique"])
    square = np.array([[5.5, 5.5], [20.5, 5.5], [20.5, 20.5], [5.5, 20.5]])
    hole = np.array([[9.5, 9.5], [15.5, 9.5], [15.5, 15.5], [9.5, 15.5]])
    shapes = [
        outline(grid, hole, 1, "exclude"), outline(grid, square, 1),
        outline(grid, square + 10, 1), outline(grid, square, 3),
    ]  # fmt: skip
    filled = rasterise(region(*shapes), grid)
    # Squares of 15 x 15 voxels that share 5 x 5; a hole of 6 x 6 in slice 1 alone.
    expected = (inside_of(square, (48, 40)) | inside_of(square + 10, (48, 40))) & ~inside_of(
        hole, (48, 40)
    )
    np.testing.assert_array_equal(filled[..., 1], expected)
    # Its last voxel at (15, 15) is of the second square's too, and stays cut out.
    assert filled[..., 1].sum() == 225 + 225 - 25 - 36
    assert filled[..., 3].sum() == 225
    np.testing.assert_array_equal(filled, rasterise(region(*shapes[::-1]), grid))


def test_an_outline_reaching_out_of_the_image_is_cut_at_its_edge() -> None:
    grid = grid_of(AFFINES["flipped"])
    square = np.array([[-9.5, -9.5], [4.5, -9.5], [4.5, 7.5], [-9.5, 7.5]])
    filled = rasterise(region(outline(grid, square, 0)), grid)
    assert filled.sum() == 5 * 8
    assert filled[:5, :8, 0].all()


@pytest.mark.parametrize("k", [-3.0, 9.0])
def test_an_outline_on_no_slice_covers_nothing(k: float) -> None:
    grid = grid_of(AFFINES["plain"])
    assert not rasterise(region(outline(grid, STAR, k)), grid).any()


def test_an_outline_belongs_to_the_nearest_slice() -> None:
    grid = grid_of(AFFINES["oblique"])
    for k in (1.6, 2.0, 2.4):
        filled = rasterise(region(outline(grid, STAR, k)), grid)
        assert filled.any(axis=(0, 1)).tolist() == [False, False, True, False]


def test_an_outline_across_slices_is_refused() -> None:
    grid = grid_of(AFFINES["plain"])
    flat = outline(grid, STAR, 1).points_mm.copy()
    flat[0, 2] += 8.0
    with pytest.raises(ValueError, match="does not lie in one slice"):
        rasterise(region(Outline(points_mm=flat)), grid)


def ball(grid: Grid, centre_mm: np.ndarray, radius_mm: float) -> np.ndarray:
    indices = np.stack(np.meshgrid(*map(np.arange, grid.shape), indexing="ij"), axis=-1)
    points = nib.affines.apply_affine(grid.affine_mm, indices)
    return np.linalg.norm(points - centre_mm, axis=-1) < radius_mm


def labelled(mask: np.ndarray, affine: np.ndarray) -> Region:
    grid = Grid(shape=mask.shape, affine_mm=affine)
    return Region(name="label", organ="liver", shape=LabelMask(mask=mask, grid=grid))


@pytest.mark.parametrize("axes", ["LPI", "RAI", "SPL", "ARS", "PIR"])
def test_a_mask_stored_another_way_round_lands_on_the_same_voxels(axes: str) -> None:
    rng = np.random.default_rng(3)
    mask = rng.random((9, 8, 7)) < 0.4
    affine = AFFINES["oblique"]
    turn = nib.orientations.ornt_transform(
        nib.io_orientation(affine), nib.orientations.axcodes2ornt(axes)
    )
    turned = nib.orientations.apply_orientation(mask, turn).astype(bool)
    moved = affine @ nib.orientations.inv_ornt_aff(turn, mask.shape)
    found = rasterise(labelled(turned, moved), grid_of(affine, (9, 8, 7)))
    np.testing.assert_array_equal(found, mask)


@pytest.mark.parametrize("name", AFFINES)
def test_a_mask_on_a_finer_tilted_grid_lands_where_the_ball_is(name: str) -> None:
    grid = grid_of(AFFINES[name], (40, 40, 8))
    centre = grid.to_mm([19.0, 20.0, 3.5])
    fine = np.eye(4)
    fine[:3, :3] = Rotation.from_euler("zxy", [30, 20, -10], degrees=True).as_matrix()
    fine[:3, 3] = centre - fine[:3, :3] @ np.full(3, 30.0)
    fine_grid = Grid(shape=(61, 61, 61), affine_mm=fine)
    found = rasterise(labelled(ball(fine_grid, centre, 18.0), fine), grid)
    # A nearest neighbour lies within half the diagonal of a fine voxel, 0.87 mm.
    assert not (found & ~ball(grid, centre, 18.87)).any()
    assert not (ball(grid, centre, 17.13) & ~found).any()
    assert found.any()


def test_a_mask_that_covers_part_of_the_image_is_false_elsewhere() -> None:
    grid = grid_of(AFFINES["plain"], (10, 10, 4))
    part = grid.affine_mm.copy()
    part[:3, 3] += [3.0, 4.5, 8.0]  # two, three and one voxels
    found = rasterise(labelled(np.ones((5, 4, 2), dtype=bool), part), grid)
    expected = np.zeros((10, 10, 4), dtype=bool)
    expected[2:7, 3:7, 1:3] = True
    np.testing.assert_array_equal(found, expected)


def test_a_mask_beside_the_image_covers_nothing() -> None:
    grid = grid_of(AFFINES["plain"], (6, 6, 2))
    away = grid.affine_mm.copy()
    away[0, 3] += 500.0
    assert not rasterise(labelled(np.ones((6, 6, 2), dtype=bool), away), grid).any()


def test_the_mask_that_comes_out_is_the_callers_own() -> None:
    affine = AFFINES["plain"]
    given = labelled(np.ones((4, 4, 2), dtype=bool), affine)
    found = rasterise(given, grid_of(affine, (4, 4, 2)))
    found[:] = False
    assert isinstance(given.shape, LabelMask)
    assert given.shape.mask.all()
