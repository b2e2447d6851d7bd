"""Where nothing measures sigma, an upper bound stands in, and only where it cannot move a value."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.errors import StudyRefused
from liverfe.noise import estimate_noise, sigma_ceiling
from liverfe.study import Method, assess_study
from tests.scenes import S0, Scene, make_scene

TWO_ECHOES_MS = np.array([1.2, 4.8])


def masked(scene: Scene) -> Scene:
    """Background set to zero, as some scanners do."""
    m = np.where(scene.body[..., None], scene.stack.magnitude, 0.0)
    return scene.with_magnitude(m)


@pytest.mark.parametrize("snr", [30.0, 100.0])
def test_in_one_tissue_the_bound_is_sigma_itself(snr: float) -> None:
    scene = masked(make_scene(40.0, snr=snr, times_ms=TWO_ECHOES_MS))
    ceiling = sigma_ceiling(scene.stack)
    assert ceiling.sigma == pytest.approx(S0 / snr, rel=0.05)


def test_iron_that_differs_only_raises_the_bound() -> None:
    rng = np.random.default_rng(3)
    body = np.array(make_scene(100.0, snr=100.0, times_ms=TWO_ECHOES_MS).stack.magnitude)
    rates = rng.gamma(1 / 0.3**2, 100.0 * 0.3**2, body.shape[:3])
    scene = make_scene(100.0, snr=100.0, times_ms=TWO_ECHOES_MS)
    body[..., 1] = body[..., 0] * np.exp(-rates * 3.6e-3)
    ceiling = sigma_ceiling(masked(scene.with_magnitude(body)).stack)
    assert ceiling.sigma is not None
    assert ceiling.sigma > 2.0 * S0 / 100.0


def test_two_echoes_without_background_are_measured_where_noise_cannot_matter() -> None:
    scene = masked(make_scene(100.0, snr=100.0, times_ms=TWO_ECHOES_MS))
    result = assess_study(scene.stack, [scene.region()], Method())
    assert result.noise is not None
    assert result.noise.method == "ceiling"
    assert result.regions[0].summary.r2star.value == pytest.approx(100.0, rel=0.02)
    assert {"noise-ceiling", "two-echoes"} <= {f.code for f in result.findings}


def test_and_refused_where_it_could() -> None:
    """At 700 /s the second echo is 1.4 sigma: its floor lifts it by a third, R2* by a tenth."""
    scene = masked(make_scene(700.0, snr=40.0, times_ms=TWO_ECHOES_MS))
    with pytest.raises(StudyRefused) as refusal:
        assess_study(scene.stack, [scene.region()], Method(voxel_relative_se=0.5))
    assert refusal.value.findings[0].code == "noise-unknown"


def test_noise_alone_has_no_bound() -> None:
    noise = np.sqrt(np.random.default_rng(9).chisquare(2, (72, 72, 2, 2)))
    scene = make_scene(100.0, times_ms=TWO_ECHOES_MS).with_magnitude(noise)
    assert sigma_ceiling(scene.stack).sigma is None


def test_a_bound_is_never_taken_where_one_way_is_forced() -> None:
    scene = masked(make_scene(100.0, times_ms=TWO_ECHOES_MS))
    for method in ("air", "residual"):
        with pytest.raises(StudyRefused) as refusal:
            estimate_noise(scene.stack, method=method)
        assert refusal.value.findings[0].code == "noise-unknown"
