"""What the pictures show: slice, echo, outline, colours. Truth is in how the arrays were made."""

from __future__ import annotations

import base64
import io
import re
from dataclasses import replace

import matplotlib
import numpy as np
import pytest
from matplotlib import image as mpl_image

from liverfe.maps import VoxelStatus
from liverfe.report.decay_plot import draw_decay
from liverfe.report.orientation import SliceView
from liverfe.report.pictures import draw_map, draw_slice, scale_of_field, voxel_edges
from liverfe.report.scene import Scene, choose_scene
from tests.report.studies import SLICE, axial_grid, make_maps, make_stack, make_summary

_VIEW = SliceView.of(axial_grid())


def images_in(svg: str) -> list[np.ndarray]:
    """Raster images of an SVG, in order, as floats 0..1 with alpha."""
    found = re.findall(r"data:image/png;base64,\s*([^\"]+)\"", svg)
    return [mpl_image.imread(io.BytesIO(base64.b64decode(data)), format="png") for data in found]


def small_scene(status: list[list[int]], r2star: list[list[float]]) -> Scene:
    values = np.array(r2star, dtype=np.float32)
    return Scene(
        view=replace(_VIEW, width_mm=10.0 * values.shape[1], height_mm=10.0 * values.shape[0]),
        k=0,
        e=0,
        magnitude=np.ones_like(values),
        r2star_per_s=values,
        status=np.array(status, dtype=np.uint8),
        mask=None,
    )


def test_slice_with_most_of_the_region_is_shown() -> None:
    stack = make_stack()
    assert choose_scene(stack, make_maps(stack), make_summary()).k == SLICE


def test_echo_nearest_to_half_of_t2star_is_shown() -> None:
    stack = make_stack()
    # R2* 312.4 1/s: half of T2* is 1.60 ms; echoes at 0.9, 1.8, 2.7 ...: 1.8 is nearest.
    assert choose_scene(stack, make_maps(stack), make_summary()).e == 1
    censored = make_summary(r2star=replace(make_summary().r2star, qualifier=">"))
    assert choose_scene(stack, make_maps(stack), censored).e == 0


def test_voxels_of_the_region_without_signal_are_painted_as_over_the_limit() -> None:
    stack = make_stack()
    mask = np.zeros(stack.grid.shape, dtype=bool)
    mask[40, 60, SLICE] = True
    scene = choose_scene(stack, make_maps(stack), make_summary(over_limit=mask))
    over = np.asarray(scene.status) == VoxelStatus.OVER_LIMIT
    rows, columns = np.nonzero(over)
    assert (60, 40) in set(zip(rows.tolist(), columns.tolist(), strict=True))


def test_colours_are_those_of_the_fixed_scale_and_do_not_follow_the_data() -> None:
    # Log scale 20..1000: 20 is the first colour, sqrt(20 * 1000) = 141.4 the middle one, 1000 the
    # last, and what lies beyond keeps the end's colour.
    measured = VoxelStatus.MEASURED
    values = [[20.0, 141.4214, 1000.0], [5.0, 141.4214, 4000.0]]
    scene = small_scene([[measured] * 3] * 2, values)
    picture = images_in(draw_map(scene, scale_per_s=(20.0, 1000.0)))[0]
    colours = picture[3::6, 3::6, :3]
    expected = matplotlib.colormaps["cividis"]([0.0, 0.5, 1.0])[:, :3]
    assert colours[0] == pytest.approx(expected, abs=0.01)
    assert colours[1] == pytest.approx(expected, abs=0.01)


def test_outside_and_failed_are_transparent_and_over_limit_is_hatched() -> None:
    codes = [
        VoxelStatus.OUTSIDE, VoxelStatus.MEASURED, VoxelStatus.OVER_LIMIT,
        VoxelStatus.UNDER_LIMIT, VoxelStatus.FAILED,
    ]  # fmt: skip
    nan = float("nan")
    scene = small_scene([list(codes)], [[nan, 100.0, nan, nan, nan]])
    picture = images_in(draw_map(scene, scale_per_s=(20.0, 1000.0)))[0]
    voxels = [picture[:, 6 * i : 6 * i + 6] for i in range(5)]
    opaque = [bool(v[..., 3].all()) for v in voxels]
    assert opaque == [False, True, True, True, False]
    assert not voxels[0][..., 3].any()
    assert not voxels[4][..., 3].any()
    # Two tones, far apart in grey: a hatch is a hatch without colour as well.
    grey = voxels[2][..., :3] @ np.array([0.299, 0.587, 0.114])
    assert (grey > 0.85).mean() == pytest.approx(0.5, abs=0.1)
    assert (grey < 0.35).mean() == pytest.approx(0.5, abs=0.1)
    assert voxels[2][..., :3].min(axis=-1).max() < 0.95  # the pale tone is not paper
    lowest = matplotlib.colormaps["cividis"](0.0)[:3]
    assert voxels[3][0, 0, :3] == pytest.approx(lowest, abs=0.01)


def test_colour_scale_rises_evenly_in_grey() -> None:
    ramp = matplotlib.colormaps["cividis"](np.linspace(0, 1, 64))[:, :3]
    steps = np.diff(ramp @ np.array([0.299, 0.587, 0.114]))
    assert (steps > 0).all()


def test_scale_depends_on_the_field_alone() -> None:
    assert scale_of_field(1.5) == (20.0, 1000.0)
    assert scale_of_field(2.89) == scale_of_field(3.0) == scale_of_field(None) == (20.0, 2000.0)


def test_outline_is_as_long_as_the_rectangle_that_it_encloses() -> None:
    mask = np.zeros((72, 96), dtype=bool)
    mask[10:14, 20:27] = True
    path = voxel_edges(mask, _VIEW)  # voxels of 4 x 4 mm
    ends = path.vertices.reshape(-1, 2, 2)
    lengths = np.linalg.norm(ends[:, 1] - ends[:, 0], axis=1)
    assert lengths.sum() == pytest.approx(2 * (4 + 7) * 4.0)
    assert path.vertices.min(axis=0) == pytest.approx([80.0, 40.0])
    assert path.vertices.max(axis=0) == pytest.approx([108.0, 56.0])


def test_outline_at_the_image_border_is_closed() -> None:
    mask = np.ones((72, 96), dtype=bool)
    ends = voxel_edges(mask, _VIEW).vertices.reshape(-1, 2, 2)
    assert np.linalg.norm(ends[:, 1] - ends[:, 0], axis=1).sum() == pytest.approx(2 * (288 + 384))


def test_grey_picture_is_the_signal_of_slice_and_echo() -> None:
    stack = make_stack()
    scene = choose_scene(stack, make_maps(stack), make_summary())
    picture = images_in(draw_slice(scene))[0]
    signal = stack.magnitude[:, :, SLICE, 1].T
    expected = np.clip(signal / np.percentile(signal, 99.5), 0, 1)
    assert picture[..., 0] == pytest.approx(expected, abs=1 / 255)


@pytest.mark.parametrize("voxel_mm", [(4.0, 4.0), (2.0, 5.0), (6.0, 1.5)])
def test_scale_bar_and_voxels_are_drawn_to_the_same_scale(voxel_mm: tuple[float, float]) -> None:
    scene = small_scene([[1] * 30] * 20, [[50.0] * 30] * 20)
    view = replace(scene.view, width_mm=30 * voxel_mm[0], height_mm=20 * voxel_mm[1])
    svg = draw_slice(replace(scene, view=view))
    across, down = map(float, re.findall(r"matrix\(([\d.]+) 0 0 ([\d.]+) ", svg)[0])
    assert across / down == pytest.approx(voxel_mm[0] / voxel_mm[1], rel=1e-4)
    length_mm = float(re.findall(r">(\d+) mm<", svg)[0])
    bar = re.findall(r"M ([\d.]+) [\d.]+ \nL ([\d.]+) [\d.]+ \n\"[^>]*stroke-width: 2\"", svg)[0]
    assert float(bar[1]) - float(bar[0]) == pytest.approx(
        length_mm * across / voxel_mm[0], rel=1e-4
    )


def test_an_image_of_zeros_or_missing_values_is_drawn_black() -> None:
    scene = small_scene([[0, 0]], [[np.nan, np.nan]])
    blank = replace(scene, magnitude=np.array([[0.0, np.nan]]))
    assert not images_in(draw_slice(blank))[0][..., :3].any()


def test_text_in_figures_stays_text_and_vectors_stay_vectors() -> None:
    svg = draw_decay(make_summary().decay, is_limit=False)
    assert "<image" not in svg
    assert ">noise floor<" in svg
    assert ">echo time (ms)<" in svg


def test_decay_plot_bears_zero_signal_and_a_floor_far_below() -> None:
    decay = make_summary().decay
    zeros = np.zeros_like(decay.signal)
    assert "<svg" in draw_decay(replace(decay, signal=zeros, signal_low=zeros), is_limit=False)
    assert "<svg" in draw_decay(replace(decay, noise_floor=1e-9), is_limit=False)
    assert "<svg" in draw_decay(replace(decay, noise_floor=0.0), is_limit=False)


def test_a_curve_at_the_limit_is_not_called_a_fit() -> None:
    svg = draw_decay(make_summary().decay, is_limit=True)
    assert ">decay at the limit of this scan<" in svg
    assert "fit with noise floor" not in svg


def test_drawing_twice_gives_the_same_text() -> None:
    assert draw_decay(make_summary().decay, is_limit=False) == draw_decay(
        make_summary().decay, is_limit=False
    )
