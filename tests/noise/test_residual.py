"""Sigma from the decay itself: within 5 % without air, and blind to what is not noise."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import ndimage

from liverfe.noise import sigma_from_residuals
from tests.noise.abdomens import SHAPE, abdomen, stack_of, zero_filled

pytestmark = pytest.mark.slow


def share(magnitude: np.ndarray, times_ms: np.ndarray, sigma: float, n: int = 1) -> float:
    """What is found over the truth."""
    found = sigma_from_residuals(stack_of(magnitude, times_ms), n_channels=n)
    assert found.sigma is not None, found.remark
    assert found.n_channels == n
    return found.sigma / sigma


@pytest.mark.parametrize("in_air", [True, False])
@pytest.mark.parametrize("snr", [10.0, 15.0, 20.0, 50.0, 300.0])
@pytest.mark.parametrize("rate", [35.0, 100.0])
def test_sigma_is_found_at_any_snr(snr: float, rate: float, in_air: bool) -> None:
    scene = abdomen(body_per_s=rate, liver_per_s=rate, in_air=in_air)
    sigma = 400.0 / snr
    assert share(scene.magnitude(sigma), scene.times_ms, sigma) == pytest.approx(1.0, abs=0.04)


@pytest.mark.parametrize("n", [4, 16, 32])
@pytest.mark.parametrize("rate", [35.0, 300.0])
def test_the_noise_power_of_many_channels_is_taken_off(n: int, rate: float) -> None:
    scene = abdomen(body_per_s=rate, liver_per_s=rate)
    found = share(scene.magnitude(8.0, n=n), scene.times_ms, 8.0, n)
    assert found == pytest.approx(1.0, abs=0.05)


@pytest.mark.parametrize("n_echoes", [3, 4, 12])
def test_a_masked_background_does_not_matter(n_echoes: int) -> None:
    scene = abdomen(times_ms=2.0 * np.arange(1, n_echoes + 1))
    magnitude = scene.magnitude(4.0)
    magnitude[~scene.body] = 0.0
    assert share(magnitude, scene.times_ms, 4.0) == pytest.approx(1.0, abs=0.05)


@pytest.mark.parametrize("fast_share", [0.1, 0.3, 0.5])
def test_curved_decays_do_not_pass_for_noise(fast_share: float) -> None:
    # Two exponentials in every voxel: a misfit of up to 1.7 sigma of its own.
    scene = abdomen(fast_share=fast_share)
    assert share(scene.magnitude(4.0), scene.times_ms, 4.0) == pytest.approx(1.0, abs=0.06)


@pytest.mark.parametrize("times", [1.2 * np.arange(1, 7), 1.0 + 1.2 * np.arange(12)])
@pytest.mark.parametrize("fat", [0.05, 0.1, 0.2])
def test_liver_fat_does_not_pass_for_noise(fat: float, times: np.ndarray) -> None:
    scene = abdomen(liver_fat=fat, liver_per_s=60.0, times_ms=times)
    assert share(scene.magnitude(8.0), scene.times_ms, 8.0) == pytest.approx(1.0, abs=0.08)


@pytest.mark.parametrize("times", [[4.6, 9.2, 13.8], [1.2, 2.4, 3.6, 4.8, 6.0, 7.2]])
def test_a_layer_of_bright_fat_does_not_pass_for_noise(times: list[float]) -> None:
    # Pairs of voxels across its border differ by more than noise: they are left out.
    scene = abdomen(fat_layer=True, times_ms=np.array(times))
    assert share(scene.magnitude(8.0), scene.times_ms, 8.0) == pytest.approx(1.0, abs=0.06)


@pytest.mark.parametrize("factor", [1.25, 1.5, 2.0, 3.0, 4.0])
@pytest.mark.parametrize("n", [1, 8])
def test_interpolated_images_keep_their_sigma(factor: float, n: int) -> None:
    # Zero-filling: noise of neighbours is correlated as sinc(distance / factor).
    small = abdomen(shape=(64, 56, 4), in_air=False)
    magnitude = zero_filled(small.amplitude, 4.0, factor, n=n, seed=6)
    allowed = 0.05 if factor > 3.0 else 0.03
    assert share(magnitude, small.times_ms, 4.0, n) == pytest.approx(1.0, abs=allowed)


def test_images_of_whole_numbers_do() -> None:
    scene = abdomen(s0=100.0)
    # Rounding adds 1/12 to the variance: 4 % of sigma at one count.
    found = share(np.rint(scene.magnitude(1.0)), scene.times_ms, np.sqrt(1 + 1 / 12))
    assert found == pytest.approx(1.0, abs=0.03)


def test_smoothed_images_show_their_own_smaller_noise() -> None:
    scene = abdomen()
    plain = scene.magnitude(4.0)
    smooth = ndimage.uniform_filter(plain, (2, 2, 1, 1))
    # The mean of four: half the SD.
    assert share(smooth, scene.times_ms, 2.0) == pytest.approx(1.0, abs=0.08)


def test_two_echoes_leave_no_residual() -> None:
    scene = abdomen(times_ms=np.array([2.4, 4.8]))
    found = sigma_from_residuals(scene.stack(scene.magnitude(4.0)))
    assert found.sigma is None
    assert "two echoes" in found.remark


def test_images_without_noise_have_no_sigma() -> None:
    scene = abdomen()
    constant = np.full((*SHAPE, 12), 100.0)
    assert sigma_from_residuals(stack_of(constant, scene.times_ms)).sigma is None
    found = sigma_from_residuals(scene.stack(scene.amplitude)).sigma
    assert found is None or found < 1e-4 * 400.0  # what float32 leaves


@pytest.mark.parametrize("shape", [(3, 3, 1), (4, 4, 40), (1, 1, 1)])
def test_images_too_small_for_partners_are_closed(shape: tuple[int, int, int]) -> None:
    rng = np.random.default_rng(7)
    magnitude = np.exp(-0.05 * np.arange(12)) * 100 + rng.standard_normal((*shape, 12))
    assert sigma_from_residuals(stack_of(magnitude, 1.0 + np.arange(12))).sigma is None


def test_noise_alone_has_no_residual() -> None:
    rng = np.random.default_rng(8)
    magnitude = np.sqrt(rng.chisquare(2, (*SHAPE, 12)))
    found = sigma_from_residuals(stack_of(magnitude, 1.0 + np.arange(12)))
    assert found.sigma is None


def test_missing_images_and_values_are_left_out() -> None:
    scene = abdomen()
    magnitude = scene.magnitude(4.0)
    magnitude[:, :, 1, 3] = np.nan
    magnitude[30, 30, 0, 0] = np.inf
    assert share(magnitude, scene.times_ms, 4.0) == pytest.approx(1.0, abs=0.05)
    magnitude[..., 0] = np.nan
    assert sigma_from_residuals(scene.stack(magnitude)).sigma is None
