"""The rule that chooses: air where both agree, tissue where not, and no number where neither."""

from __future__ import annotations

from types import SimpleNamespace

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from liverfe.errors import StudyRefused
from liverfe.noise import NoiseLevel, estimate_noise
from tests.noise.abdomens import SHAPE, abdomen, stack_of

SCENE = abdomen()
PLAIN = SCENE.magnitude(4.0)


def codes(noise: NoiseLevel) -> list[str]:
    return [finding.code for finding in noise.findings]


def test_air_is_taken_where_both_agree() -> None:
    noise = estimate_noise(SCENE.stack(PLAIN))
    assert noise.method == "air"
    assert (noise.sigma, noise.n_channels) == (pytest.approx(4.0, rel=0.02), 1)
    assert [candidate.method for candidate in noise.candidates] == ["air", "residual"]
    assert codes(noise) == []


def test_tissue_is_taken_where_they_differ() -> None:
    # Parallel imaging: 1.6 times the noise in the middle of the body.
    x, y = np.meshgrid(*(np.linspace(-1, 1, size) for size in SHAPE[:2]), indexing="ij")
    sigma = 4.0 * np.where(x**2 + y**2 < 0.6, 1.6, 1.0)[..., None, None]
    noise = estimate_noise(SCENE.stack(SCENE.magnitude(sigma)))
    assert noise.method == "residual"
    assert noise.sigma == pytest.approx(6.4, rel=0.05)


@pytest.mark.parametrize("n", [8, 16])
def test_channels_told_by_the_air_go_with_the_sigma_of_the_tissue(n: int) -> None:
    scene = abdomen(body_per_s=200.0, liver_per_s=300.0)
    noise = estimate_noise(scene.stack(scene.magnitude(8.0, n=n)))
    assert (noise.method, noise.n_channels) == ("air", n)
    for candidate in noise.candidates:
        assert candidate.sigma == pytest.approx(8.0, rel=0.05)
        assert candidate.n_channels == n


def test_a_masked_background_is_made_up_for_by_tissue_and_told() -> None:
    magnitude = PLAIN.copy()
    magnitude[~SCENE.body] = 0.0
    noise = estimate_noise(SCENE.stack(magnitude))
    assert noise.method == "residual"
    assert noise.sigma == pytest.approx(4.0, rel=0.05)
    assert codes(noise) == ["channels-not-tested"]
    assert codes(estimate_noise(SCENE.stack(magnitude), n_channels=4)) == []
    assert estimate_noise(SCENE.stack(magnitude), n_channels=4).n_channels == 4


@pytest.mark.parametrize("method", ["air", "residual"])
def test_one_way_can_be_forced(method: str) -> None:
    noise = estimate_noise(SCENE.stack(PLAIN), method=method)
    assert noise.method == method
    assert noise.sigma == pytest.approx(4.0, rel=0.03)


def test_a_given_sigma_is_taken_as_given() -> None:
    noise = estimate_noise(SCENE.stack(PLAIN), method="given", sigma=5.5, n_channels=3)
    assert (noise.sigma, noise.n_channels, noise.method) == (5.5, 3, "given")
    assert noise.relative_sd == 0.0
    with pytest.raises(ValueError, match="needs sigma"):
        estimate_noise(SCENE.stack(PLAIN), method="given")


def test_no_way_open_leaves_a_bound_and_tells_both_reasons() -> None:
    scene = abdomen(in_air=False, times_ms=np.array([2.3, 4.6]))
    noise = estimate_noise(scene.stack(scene.magnitude(8.0)))
    assert noise.method == "ceiling"
    # A bound: never below the truth by more than the scatter of its estimate.
    assert noise.sigma > 0.95 * 8.0
    told = next(finding for finding in noise.findings if finding.code == "noise-ceiling")
    assert told.level == "caution"
    assert "air: " in told.text
    assert "residual: two echoes" in told.text


def test_a_forced_way_that_is_closed_is_refused() -> None:
    magnitude = PLAIN.copy()
    magnitude[~SCENE.body] = 0.0
    with pytest.raises(StudyRefused, match="zero"):
        estimate_noise(SCENE.stack(magnitude), method="air")


def test_low_signal_does_not_make_the_tissue_overrule_good_air() -> None:
    # Echoes chosen by their own noise once read 12 % low at an SNR of 10, and were believed.
    scene = abdomen(liver_per_s=35.0)
    noise = estimate_noise(scene.stack(scene.magnitude(40.0)))
    assert noise.sigma == pytest.approx(40.0, rel=0.03)


def test_fat_does_not_make_the_tissue_overrule_good_air() -> None:
    # The misfit of 15 % fat in all tissue once read as 2.5 times the noise, and hid itself.
    scene = abdomen(liver_fat=0.15, liver_per_s=60.0, times_ms=1.2 * np.arange(1, 9))
    noise = estimate_noise(scene.stack(scene.magnitude(8.0)))
    assert noise.method == "air"
    assert noise.sigma == pytest.approx(8.0, rel=0.02)


@settings(
    max_examples=12, deadline=None, derandomize=True,
    suppress_health_check=[HealthCheck.too_slow],
)  # fmt: skip
@given(exponent=st.floats(-6, 6), n=st.sampled_from([1, 4]))
def test_scaling_the_images_scales_sigma(exponent: float, n: int) -> None:
    factor = 10.0**exponent
    magnitude = SCENE.magnitude(4.0, n=n)
    one = estimate_noise(SCENE.stack(magnitude))
    other = estimate_noise(SCENE.stack(magnitude * factor))
    assert other.sigma == pytest.approx(one.sigma * factor, rel=1e-3)
    assert (other.method, other.n_channels) == (one.method, one.n_channels)


def test_sigma_does_not_hang_on_the_order_of_slices_or_the_way_round() -> None:
    one = estimate_noise(SCENE.stack(PLAIN))
    for view in (PLAIN[::-1], PLAIN[:, ::-1], PLAIN[:, :, ::-1]):
        assert estimate_noise(SCENE.stack(view)).sigma == pytest.approx(one.sigma, rel=2e-3)


@pytest.mark.parametrize("n_slices", [1, 3, 20])
def test_any_number_of_slices_does(n_slices: int) -> None:
    # Voxels are thinned where there are many: no slice may be left out by a common factor.
    scene = abdomen(shape=(160, 150, n_slices), times_ms=np.array([1.2, 2.4, 3.6]))
    sigma = 4.0 * np.where(np.arange(n_slices) % 2 == 0, 1.0, 1.1)[:, None]
    noise = estimate_noise(scene.stack(scene.magnitude(sigma)))
    power = float(np.sqrt((sigma**2).mean()))
    assert noise.sigma == pytest.approx(power, rel=0.02)


def test_a_noise_level_is_positive_and_locked() -> None:
    for sigma in (0.0, -1.0, np.nan, np.inf):
        with pytest.raises(ValueError, match="sigma must be a positive number"):
            NoiseLevel(sigma=sigma, n_channels=1, method="given", relative_sd=0.0)
    with pytest.raises(ValueError, match="n_channels"):
        NoiseLevel(sigma=1.0, n_channels=0, method="given", relative_sd=0.0)
    own = np.ones((2, 2, 1))
    noise = NoiseLevel(sigma=1.0, n_channels=1, method="given", relative_sd=0.0, sigma_map=own)
    own[:] = 5.0
    assert noise.sigma_map is not None
    assert (noise.sigma_map == 1.0).all()
    with pytest.raises(ValueError, match="read-only"):
        noise.sigma_map[0, 0, 0] = 2.0


def test_images_of_noise_alone_are_refused() -> None:
    rng = np.random.default_rng(9)
    magnitude = np.sqrt(rng.chisquare(2, (*SHAPE, 12)))
    with pytest.raises(StudyRefused):
        estimate_noise(stack_of(magnitude, 1.0 + np.arange(12)))


def test_whole_air_of_the_same_sigma_is_not_given_up_for_a_guess_at_the_channels(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    # Zero-filled images: voxels share their noise, and once in sixty scans dark echoes "told" 61
    # channels (R2* 60 read 65). Here they guess wrong in every scan.
    monkeypatch.setattr(
        "liverfe.noise.tissue.channels_of_dark_tissue",
        lambda *_: SimpleNamespace(channels=68.9, fewest=31.6, most=106.1),
    )
    body = abdomen()
    noise = estimate_noise(body.stack(body.magnitude(6.0, seed=3)))
    assert (noise.method, noise.n_channels) == ("air", 1)
    assert noise.sigma == pytest.approx(6.0, rel=0.01)
