"""The abdomen lies in the patient as anatomy has it, on any grid."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from liverfe.errors import UsageError
from liverfe.grid import Grid
from liverfe.phantom import STRUCTURES, Phantom, load_recipe, make_phantom
from liverfe.phantom.abdomen import draw_abdomen
from liverfe.phantom.geometry import grid_of


def centroid_mm(phantom: Phantom, *structures: str) -> NDArray[np.float64]:
    indices = np.argwhere(phantom.structures.mask(structures))
    return phantom.grid.to_mm(indices).mean(axis=0)


def test_liver_lies_on_the_patients_right_and_spleen_and_stomach_on_the_left(
    phantom: Phantom,
) -> None:
    # RAS+: +x is the patient's right.
    assert centroid_mm(phantom, "liver right", "liver left")[0] > 40
    assert centroid_mm(phantom, "spleen")[0] < -80
    assert centroid_mm(phantom, "stomach")[0] < -40
    assert centroid_mm(phantom, "liver right")[0] > centroid_mm(phantom, "liver left")[0] + 40


def test_spine_and_muscle_lie_behind_and_the_aorta_left_of_the_vena_cava(phantom: Phantom) -> None:
    front = centroid_mm(phantom, "liver left")[1]
    assert centroid_mm(phantom, "vertebra")[1] < -30 < front
    assert centroid_mm(phantom, "paraspinal muscle")[1] < centroid_mm(phantom, "vertebra")[1]
    assert centroid_mm(phantom, "aorta")[0] < 0 < centroid_mm(phantom, "vena cava")[0]
    assert centroid_mm(phantom, "aorta")[1] > centroid_mm(phantom, "vertebra")[1]


def test_in_an_axial_slice_as_radiologists_hang_it_the_liver_is_at_image_left() -> None:
    # First column of a DICOM axial image = patient's right (image orientation 1 0 0 0 1 0).
    recipe = load_recipe("bench-24-slices")
    labels = draw_abdomen(grid_of(recipe.geometry), recipe.anatomy)
    columns, _, _ = np.nonzero(labels.mask(("liver right",)))
    assert columns.mean() < 256 / 2 - 25
    _, spine_rows, _ = np.nonzero(labels.mask(("vertebra",)))
    assert spine_rows.mean() > 192 / 2 + 20


def test_every_shipped_slice_holds_liver_and_is_framed_by_air() -> None:
    for name in ("demo-thalassaemia-1p5t", "bench-24-slices", "two-echoes"):
        recipe = load_recipe(name)
        drawn = draw_abdomen(grid_of(recipe.geometry), recipe.anatomy)
        assert drawn.mask(("liver right",)).any(axis=(0, 1)).all()
        frame = np.ones(drawn.labels.shape[:2], dtype=bool)
        frame[3:-3, 3:-3] = False
        assert (drawn.labels[frame] == 0).all()
        assert set(np.unique(drawn.labels)) >= set(range(1, len(STRUCTURES) + 1)) - {4, 12}


def test_fat_layer_and_body_wall_have_the_recipes_thickness_along_a_ray() -> None:
    recipe = load_recipe("bench-24-slices")
    # A ray from the right flank inwards, sampled every 0.1 mm.
    affine = np.diag([-0.1, 0.1, 0.1, 1.0])
    affine[:3, 3] = (200.0, 0.0, 0.0)
    ray = draw_abdomen(Grid(shape=(1000, 1, 1), affine_mm=affine), recipe.anatomy)
    for structure, thickness_mm in (("subcutaneous fat", 14.0), ("body wall", 8.0)):
        n_samples = int(ray.mask((structure,)).sum())
        assert n_samples * 0.1 == pytest.approx(thickness_mm, abs=0.11)
    first = int(np.flatnonzero(ray.labels[:, 0, 0])[0])
    assert 200.0 - first * 0.1 == pytest.approx(168.0, abs=0.11)


def test_a_turned_grid_finds_the_same_structure_at_the_same_place(phantom: Phantom) -> None:
    plan = phantom.recipe.anatomy
    picked = np.random.default_rng(3).integers((0, 0, 0), phantom.grid.shape, size=(200, 3))
    for index in picked:
        affine = np.eye(4)
        affine[:3, 3] = phantom.grid.to_mm(index)
        alone = draw_abdomen(Grid(shape=(1, 1, 1), affine_mm=affine), plan)
        assert alone.labels[0, 0, 0] == phantom.structures.labels[tuple(index)]


def test_an_oblique_grid_is_turned_about_its_centre_by_the_recipes_angle(phantom: Phantom) -> None:
    grid = phantom.grid
    assert grid.voxel_size_mm == pytest.approx((4.8, 4.4, 10.0))
    middle = (np.array(grid.shape) - 1) / 2
    np.testing.assert_allclose(grid.to_mm(middle), (3.0, -2.0, 4.0), atol=1e-9)
    # Turned 12 degrees about the patient's left-right axis: the slice normal leans by as much.
    np.testing.assert_allclose(
        np.abs(grid.slice_normal @ [0.0, 0.0, 1.0]), np.cos(np.radians(12.0)), atol=1e-12
    )
    assert grid.affine_mm[1, 2] == pytest.approx(-10.0 * np.sin(np.radians(12.0)))
    assert grid.affine_mm[:3, 0] == pytest.approx((-4.8, 0.0, 0.0))


@pytest.mark.parametrize(("axis", "kept"), [("y", 1), ("z", 2)])
def test_other_axes_of_turning_leave_themselves_in_place(vary, axis: str, kept: int) -> None:
    grid = grid_of(vary(('oblique_axis = "x"', f'oblique_axis = "{axis}"')).geometry)
    assert np.count_nonzero(grid.affine_mm[kept, :3]) == 1
    assert np.linalg.det(grid.affine_mm[:3, :3]) == pytest.approx(4.8 * 4.4 * 10.0)


def test_vessels_lie_inside_the_liver_in_every_shipped_recipe() -> None:
    # Two voxels outward from a vessel there is liver or another vessel, mostly: they cross it.
    recipe = load_recipe("demo-thalassaemia-1p5t")
    drawn = draw_abdomen(grid_of(recipe.geometry), recipe.anatomy)
    vessels = drawn.mask(("vessels right",))
    share = vessels.sum() / drawn.mask(("liver right", "vessels right")).sum()
    assert 0.01 < share < 0.10


def test_regions_keep_the_recipes_margin_to_everything_else(phantom: Phantom) -> None:
    # Oracle: distance from each region voxel to each voxel outside, by brute force in one slice.
    k = 2
    inside = phantom.structures.mask(("liver right",))[..., k]
    region = np.argwhere(phantom.regions[..., k] == 1) * (4.8, 4.4)
    outside = np.argwhere(~inside) * (4.8, 4.4)
    nearest = np.sqrt(((region[:, None] - outside[None]) ** 2).sum(-1)).min(1)
    assert nearest.min() > 5.0
    every = np.argwhere(inside) * (4.8, 4.4)
    far = np.sqrt(((every[:, None] - outside[None]) ** 2).sum(-1)).min(1) > 5.0
    assert far.sum() == len(region)


def test_vessels_are_left_out_of_one_region_and_kept_in_the_other(phantom: Phantom) -> None:
    vessels = phantom.structures.mask(("vessels right", "vessels left"))
    assert not (vessels & (phantom.regions == 1)).any()
    assert (vessels & (phantom.regions == 3)).any()


def test_a_region_that_holds_no_voxel_is_refused(vary) -> None:
    recipe = vary(("margin_mm = 4.0", "margin_mm = 60.0"))
    with pytest.raises(UsageError, match=r"regions\[1\]: 'spleen' holds no voxel"):
        make_phantom(recipe, np.random.default_rng(1))


def test_a_structure_cut_by_the_images_edge_keeps_its_margin_there(vary) -> None:
    # The field of view ends inside the liver: 16 columns of 4.8 mm around x = +90 mm.
    recipe = vary(
        ("columns = 80", "columns = 16"),
        ("centre_mm = [3.0, -2.0, 4.0]", "centre_mm = [90.0, -2.0, 4.0]"),
        ('structures = ["spleen"]\nmargin_mm = 4.0', 'structures = ["body wall"]'),
        ('["liver left", "vessels left"]', '["subcutaneous fat"]'),
    )
    phantom = make_phantom(recipe, np.random.default_rng(1))
    assert phantom.structures.mask(("liver right",))[-1].any()
    # A centre in the last column lies 4.8 mm from where the next one would be: under 5 mm.
    assert not (phantom.regions[-1] == 1).any()
    assert (phantom.regions[-2] == 1).any()
