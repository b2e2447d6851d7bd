"""What is not known of the noise is told with what it moves; what is known is used throughout."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.errors import StudyRefused
from liverfe.study import Method, StudyResult, assess_study
from tests.scenes import S0, TIMES_MS, Scene, make_scene, organ_mask


def assessed(scene: Scene, **choices: object) -> StudyResult:
    return assess_study(scene.stack, [scene.region()], Method.from_mapping(choices))


def codes(result: StudyResult, *levels: str) -> set[str]:
    return {finding.code for finding in result.findings if finding.level in levels}


def masked(scene: Scene) -> Scene:
    """Background set to zero, as some scanners do."""
    return scene.with_magnitude(np.where(scene.body[..., None], scene.stack.magnitude, 0.0))


def with_ramp(rate: float, sigma: np.ndarray) -> Scene:
    """The scene of `make_scene` with sigma of its own in each voxel."""
    scene = make_scene(rate)
    rates = np.where(scene.body, 40.0, 0.0)
    rates[organ_mask()] = rate
    clean = np.where(scene.body, S0, 0.0)[..., None] * np.exp(-rates[..., None] * TIMES_MS * 1e-3)
    noise = np.random.default_rng(5).standard_normal((2, *clean.shape)) * sigma[..., None]
    return scene.with_magnitude(np.hypot(clean + noise[0], noise[1]))


@pytest.mark.parametrize("rate", [60.0, 300.0, 500.0])
def test_noise_that_varies_is_used_where_it_is_and_only_noted(rate: float) -> None:
    shape = make_scene(rate).body.shape
    sigma = np.broadcast_to(np.linspace(1.0, 3.0, shape[0])[:, None, None], shape)
    result = assessed(with_ramp(rate, sigma))
    assert result.noise is not None
    assert result.noise.sigma_map is not None
    organ = organ_mask()
    found = float(np.mean(result.noise.sigma_map[organ] / sigma[organ]))
    assert found == pytest.approx(1.0, abs=0.05)
    assert result.regions[0].summary.r2star.value == pytest.approx(rate, rel=0.02)
    assert "noise-varies" in codes(result, "note")
    assert not codes(result, "caution", "stop") & {"noise-disagrees", "channels-matter"}


def test_open_channels_are_tried_and_what_they_move_is_told() -> None:
    result = assessed(masked(make_scene(120.0, snr=20.0)))
    assert result.noise is not None
    assert result.noise.channels_between is not None
    assert result.noise.n_channels == 1
    told = next(f for f in result.findings if f.code == "channels-matter")
    assert f"with {min(result.noise.channels_between[1], 16)} instead of 1" in told.text


def test_open_channels_that_move_nothing_are_a_note() -> None:
    result = assessed(masked(make_scene(60.0, snr=100.0)))
    assert "channels-not-tested" in codes(result, "note")
    assert not codes(result, "caution", "stop")


@pytest.mark.parametrize("snr", [20.0, 100.0])
def test_given_channels_leave_no_doubt(snr: float) -> None:
    result = assessed(masked(make_scene(120.0, snr=snr)), n_channels=1)
    assert not codes(result, "note", "caution") & {"channels-matter", "channels-not-tested"}


@pytest.mark.parametrize("n", [1, 8])
def test_the_joint_likelihood_can_be_chosen_in_a_method(n: int) -> None:
    result = assessed(masked(make_scene(400.0, snr=50.0, n_channels=n)), noise="joint")
    assert result.noise is not None
    assert (result.noise.method, result.noise.n_channels) == ("joint", n)
    assert result.noise.sigma == pytest.approx(S0 / 50.0, rel=0.03)
    assert result.regions[0].summary.r2star.value == pytest.approx(400.0, rel=0.02)


def test_a_joint_likelihood_that_is_closed_is_refused() -> None:
    scene = make_scene(100.0, times_ms=np.array([1.2, 4.8]))
    with pytest.raises(StudyRefused) as refusal:
        assessed(scene, noise="joint")
    assert refusal.value.findings[0].code == "noise-unknown"
