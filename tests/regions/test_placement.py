"""Where regions may lie, and what is said or refused when they lie elsewhere."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.echoes import EchoStack
from liverfe.errors import StudyRefused
from liverfe.fit import fit_r2star
from liverfe.grid import Grid
from liverfe.noise import estimate_noise
from liverfe.outlines import LabelMask, Outline, Region
from liverfe.regions import body_mask, place
from tests.scenes import Scene, make_scene


@pytest.fixture(scope="module")
def scene() -> Scene:
    return make_scene(300.0)


@pytest.fixture(scope="module")
def body(scene: Scene) -> np.ndarray:
    return body_mask(fit_r2star(scene.stack, estimate_noise(scene.stack)))


def codes(refusal: pytest.ExceptionInfo[StudyRefused]) -> set[str]:
    return {finding.code for finding in refusal.value.findings}


def test_the_body_is_the_disc_that_was_drawn(scene: Scene, body: np.ndarray) -> None:
    different = (body ^ scene.body).sum() / scene.body.sum()
    assert different < 0.03


def test_the_body_holds_an_organ_without_any_signal() -> None:
    dark = make_scene(300.0, organ_s0=0.0)
    body = body_mask(fit_r2star(dark.stack, estimate_noise(dark.stack)))
    assert (body & dark.organ).sum() == dark.organ.sum()


def test_a_region_in_place_raises_no_doubt(scene: Scene, body: np.ndarray) -> None:
    mask, findings = place(scene.region(), scene.stack, body)
    assert np.array_equal(mask, scene.organ)
    assert findings == ()


def test_a_flipped_mask_is_questioned(scene: Scene, body: np.ndarray) -> None:
    """Fault C1: flipped left to right, it lies on the other organ."""
    flipped = scene.region(mask=scene.organ[::-1])
    assert {f.code for f in place(flipped, scene.stack, body)[1]} == {"region-on-left"}
    left = scene.region("left lobe", mask=scene.organ[::-1])
    assert place(left, scene.stack, body)[1] == ()


def test_a_mask_stored_the_other_way_round_lands_in_the_same_voxels(
    scene: Scene, body: np.ndarray
) -> None:
    """The same patient voxels, first axis reversed and the affine with it."""
    affine = np.array(scene.stack.grid.affine_mm)
    affine[:3, 3] += affine[:3, 0] * (scene.organ.shape[0] - 1)
    affine[:3, 0] *= -1
    reversed_mask = LabelMask(
        mask=scene.organ[::-1], grid=Grid(shape=scene.organ.shape, affine_mm=affine)
    )
    region = Region(name="liver", organ="liver", shape=reversed_mask)
    mask, findings = place(region, scene.stack, body)
    assert np.array_equal(mask, scene.organ)
    assert {f.code for f in findings} == {"region-resampled"}


def test_a_region_outside_the_body_is_refused(scene: Scene, body: np.ndarray) -> None:
    corner = np.zeros_like(scene.organ)
    corner[:8, :8] = True
    with pytest.raises(StudyRefused) as refusal:
        place(scene.region(mask=corner), scene.stack, body)
    assert codes(refusal) == {"region-outside-body"}
    # The same voxels drawn as background are what they say.
    assert place(scene.region("background", mask=corner), scene.stack, body)[0].sum() == 128


def test_a_region_outside_the_image_is_refused(scene: Scene, body: np.ndarray) -> None:
    far = np.array([[900.0, 900, 0], [950, 900, 0], [950, 950, 0]])
    region = Region(name="liver", organ="liver", shape=(Outline(points_mm=far),))
    with pytest.raises(StudyRefused) as refusal:
        place(region, scene.stack, body)
    assert codes(refusal) == {"region-outside-image"}


def test_an_outline_across_slices_is_refused(scene: Scene, body: np.ndarray) -> None:
    tilted = np.array([[80.0, 50, 0], [120, 50, 0], [100, 90, 8]])
    region = Region(name="liver", organ="liver", shape=(Outline(points_mm=tilted),))
    with pytest.raises(StudyRefused) as refusal:
        place(region, scene.stack, body)
    assert codes(refusal) == {"region-not-planar"}


def test_a_region_on_a_slice_with_a_missing_echo_is_refused(scene: Scene, body: np.ndarray) -> None:
    present = np.ones((12, 2), dtype=bool)
    present[4, 1] = False
    holed = EchoStack(
        magnitude=scene.stack.magnitude, echo_times_ms=scene.stack.echo_times_ms,
        grid=scene.stack.grid, present=present,
    )  # fmt: skip
    with pytest.raises(StudyRefused) as refusal:
        place(scene.region(), holed, body)
    assert codes(refusal) == {"region-in-hole"}
    assert "slice 2 lacks 5.8 ms" in str(refusal.value)
    first_slice_only = scene.organ.copy()
    first_slice_only[..., 1] = False
    assert place(scene.region(mask=first_slice_only), holed, body)[1] == ()
