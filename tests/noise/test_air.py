"""Sigma and channels from background air: right to 2 %, or closed with the reason."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.noise import NoiseCandidate, sigma_from_air
from tests.noise.abdomens import SHAPE, TWELVE_MS, abdomen, stack_of

# The truth is what the arrays were made with; the estimator: Constantinides 1997 (sheet 1.5).


def is_closed(candidate: NoiseCandidate, reason: str) -> bool:
    return candidate.sigma is None and reason in candidate.remark


@pytest.mark.parametrize("n", [1, 2, 4, 8, 16])
def test_sigma_and_channels_are_found(n: int) -> None:
    scene = abdomen()
    found = sigma_from_air(scene.stack(scene.magnitude(4.0, n=n, seed=n)))
    assert found.n_channels == n
    assert found.sigma == pytest.approx(4.0, rel=0.02)
    assert found.relative_sd is not None
    assert found.relative_sd < 0.01


# Methods sheet 1.3: n, mean / sigma (published by Constantinides 1997), SD / sigma (Koay 2006).
BACKGROUND = [
    (1, 1.2533141, 0.655136), (2, 1.8799712, 0.682428), (3, 2.3499640, 0.691136),
    (4, 2.7416247, 0.695337), (6, 3.3927605, 0.699411), (8, 3.9380256, 0.701394),
    (12, 4.8482279, 0.703339), (16, 5.6128394, 0.704297), (20, 6.2851542, 0.704866),
    (24, 6.8922152, 0.705244), (32, 7.9688122, 0.705714), (64, 11.291633, 0.706413),
]  # fmt: skip


@pytest.mark.parametrize(("n", "mean", "sd"), BACKGROUND)
def test_sigma_goes_with_the_published_mean_and_sd_of_the_air(
    n: int, mean: float, sd: float
) -> None:
    # Sheet 1.5: root mean square, mean and SD of the background agree if n is right.
    scene = abdomen()
    magnitude = scene.magnitude(4.0, n=n, seed=n)
    air = magnitude[~scene.body]
    found = sigma_from_air(scene.stack(magnitude))
    assert found.n_channels == pytest.approx(n, abs=max(0.0, 0.02 * n))
    assert found.sigma is not None
    # A number of channels one off in 64 moves sigma by 1/128.
    assert found.sigma == pytest.approx(air.mean() / mean, rel=0.012)
    assert found.sigma == pytest.approx(air.std() / sd, rel=0.012)


@pytest.mark.parametrize("n", [1, 8, 32])
@pytest.mark.parametrize("rate", [300.0, 800.0, 1500.0])
@pytest.mark.parametrize("snr", [20.0, 50.0])
def test_a_dark_liver_among_the_air_makes_no_constant(n: int, rate: float, snr: float) -> None:
    # Its first echoes skew the noise of many channels: that once passed for an added constant.
    scene = abdomen(liver_per_s=rate, shape=(96, 80, 6))
    assert sigma_from_air(scene.stack(scene.magnitude(400.0 / snr, n=n))).added_constant == 0.0


def test_what_a_mask_leaves_of_the_air_is_marked_as_partial() -> None:
    scene = abdomen()
    magnitude = scene.magnitude(4.0, n=4)
    x, y = (np.linspace(-1, 1, size) for size in SHAPE[:2])
    magnitude[x[:, None] ** 2 + y**2 > 1.1] = 0.0
    found = sigma_from_air(scene.stack(magnitude))
    assert found.is_partial
    assert (found.n_channels, found.sigma) == (4, pytest.approx(4.0, rel=0.02))
    assert not sigma_from_air(scene.stack(scene.magnitude(4.0))).is_partial


@pytest.mark.parametrize("times", [[2.4, 4.8], [2.4, 4.8, 7.2], [1.2, 2.4, 3.6, 4.8]])
def test_few_echoes_do(times: list[float]) -> None:
    scene = abdomen(times_ms=np.array(times))
    for n in (1, 4):
        found = sigma_from_air(scene.stack(scene.magnitude(4.0, n=n)))
        assert (found.n_channels, found.sigma) == (n, pytest.approx(4.0, rel=0.02))


@pytest.mark.parametrize("sigma", [1.0, 2.0, 5.0, 40.0])
def test_whole_numbers_do_down_to_a_sigma_of_one_count(sigma: float) -> None:
    scene = abdomen(s0=100 * sigma)
    found = sigma_from_air(scene.stack(np.rint(scene.magnitude(sigma))))
    # Rounding adds 1/12 to the mean square of 2 sigma²: 2 % of sigma at one count.
    assert found.n_channels == 1
    assert found.sigma == pytest.approx(sigma, rel=0.025)


@pytest.mark.parametrize("slope", [1e-6, 0.37, 2e4])
def test_rescaled_whole_numbers_do(slope: float) -> None:
    scene = abdomen()
    found = sigma_from_air(scene.stack(np.rint(scene.magnitude(3.0)) * slope))
    assert found.sigma == pytest.approx(3.0 * slope, rel=0.02)


def test_known_channels_are_taken_as_known() -> None:
    # Correlated coils: the background shows 8, the reader knows better. sigma² = mean M² / 2n.
    scene = abdomen()
    found = sigma_from_air(scene.stack(scene.magnitude(4.0, n=8)), n_channels=2)
    assert found.n_channels == 2
    assert found.sigma == pytest.approx(8.0, rel=0.02)


def test_a_masked_background_is_closed() -> None:
    scene = abdomen()
    for magnitude in (scene.magnitude(4.0), np.rint(scene.magnitude(4.0))):
        magnitude[~scene.body] = 0.0
        assert is_closed(sigma_from_air(scene.stack(magnitude)), "set the background to zero")


@pytest.mark.parametrize("share", [0.03, 0.1, 0.3, 0.6, 0.9])
def test_a_partly_zeroed_background_is_closed(share: float) -> None:
    scene = abdomen()
    magnitude = scene.magnitude(4.0)
    zeroed = np.random.default_rng(1).random(magnitude.shape) < share
    magnitude[zeroed & ~scene.body[..., None]] = 0.0
    assert sigma_from_air(scene.stack(magnitude)).sigma is None


@pytest.mark.parametrize("level", [0.5, 1.0, 1.5, 2.5])
def test_a_background_cut_off_below_a_level_is_closed(level: float) -> None:
    scene = abdomen()
    magnitude = scene.magnitude(4.0)
    magnitude[magnitude < 4.0 * level] = 0.0
    assert sigma_from_air(scene.stack(magnitude)).sigma is None


def test_a_constant_background_is_closed() -> None:
    scene = abdomen()
    magnitude = scene.magnitude(4.0)
    magnitude[~scene.body] = 7.0
    assert sigma_from_air(scene.stack(magnitude)).sigma is None


@pytest.mark.parametrize("strength", [0.003, 0.01, 0.015, 0.02, 0.05, 0.1])
@pytest.mark.parametrize("n_echoes", [2, 12])
def test_a_ghost_in_the_air_costs_less_than_10_percent_or_closes_it(
    strength: float, n_echoes: int
) -> None:
    scene = abdomen(times_ms=1.0 + 1.2 * np.arange(n_echoes))
    ghost = strength * np.roll(scene.amplitude, SHAPE[1] // 2, axis=1)
    rng = np.random.default_rng(2)
    shape = ghost.shape
    magnitude = np.hypot(
        scene.amplitude + ghost + 4 * rng.standard_normal(shape), 4 * rng.standard_normal(shape)
    )
    found = sigma_from_air(scene.stack(magnitude))
    assert found.sigma is None or found.sigma == pytest.approx(4.0, rel=0.12)


@pytest.mark.parametrize("n_echoes", [2, 3, 6, 12])
def test_air_that_is_scaled_unevenly_is_closed(n_echoes: int) -> None:
    # Receive-coil normalisation by +-50 % from side to side.
    scene = abdomen(times_ms=2.4 * np.arange(1, n_echoes + 1))
    ramp = 1 + 0.5 * np.linspace(-1, 1, SHAPE[0])[:, None, None, None]
    found = sigma_from_air(scene.stack(scene.magnitude(4.0) * ramp))
    assert is_closed(found, "differs from place to place")


@pytest.mark.parametrize("snr", [20.0, 50.0])
@pytest.mark.parametrize("times", [[1.15, 2.3], [1.0, 1.5, 2.0], list(TWELVE_MS)])
@pytest.mark.parametrize("rate", [15.0, 35.0, 100.0])
def test_a_block_without_air_is_closed(snr: float, times: list[float], rate: float) -> None:
    scene = abdomen(
        in_air=False, body_per_s=rate, liver_per_s=2 * rate, times_ms=np.array(times), s0=400.0
    )
    assert sigma_from_air(scene.stack(scene.magnitude(400.0 / snr))).sigma is None


@pytest.mark.parametrize("times", [[1.15, 2.3], [1.0, 1.5], [1.0, 1.5, 2.0]])
def test_noisy_tissue_is_not_taken_for_the_noise_of_many_channels(times: list[float]) -> None:
    # Slow decay at an SNR of 10 and two echoes: M² scatters like that of 17 channels.
    scene = abdomen(in_air=False, body_per_s=15.0, liver_per_s=20.0, times_ms=np.array(times))
    found = sigma_from_air(scene.stack(scene.magnitude(40.0)))
    assert is_closed(found, "it may be tissue")


@pytest.mark.parametrize("rate", [800.0, 1500.0, 4000.0])
@pytest.mark.parametrize("n_echoes", [2, 12])
def test_a_liver_that_is_dark_in_late_echoes_does_not_disturb(rate: float, n_echoes: int) -> None:
    scene = abdomen(liver_per_s=rate, times_ms=1.0 + 1.2 * np.arange(n_echoes))
    for n in (1, 8):
        found = sigma_from_air(scene.stack(scene.magnitude(4.0, n=n)))
        if n_echoes == 2 and rate == 4000.0 and n == 1:
            # Its first echo, 1.8 sigma, can not be told from noise with one other echo alone.
            assert found.sigma is None
        else:
            assert (found.n_channels, found.sigma) == (n, pytest.approx(4.0, rel=0.02))


def test_small_patches_of_air_do() -> None:
    # 15 pixels by 60 of four slices, the rest is tissue.
    scene = abdomen(in_air=False)
    amplitude = scene.amplitude.copy()
    amplitude[:6, :20] = 0.0
    rng = np.random.default_rng(3)
    taken = 0
    for _ in range(8):
        magnitude = np.hypot(
            amplitude + 4 * rng.standard_normal(amplitude.shape),
            4 * rng.standard_normal(amplitude.shape),
        )
        found = sigma_from_air(scene.stack(magnitude))
        if found.sigma is not None:
            taken += 1
            assert found.sigma == pytest.approx(4.0, rel=0.03)
    assert taken >= 6


def test_missing_images_and_values_are_left_out() -> None:
    scene = abdomen()
    magnitude = scene.magnitude(4.0)
    magnitude[:, :, 1, 3] = np.nan
    magnitude[3, 4, 0, 0] = np.inf
    found = sigma_from_air(scene.stack(magnitude))
    assert found.sigma == pytest.approx(4.0, rel=0.02)


@pytest.mark.parametrize("shape", [(3, 3, 1), (12, 12, 2)])
def test_too_few_voxels_are_closed(shape: tuple[int, int, int]) -> None:
    rng = np.random.default_rng(4)
    magnitude = np.sqrt(rng.chisquare(2, (*shape, 12)))
    assert sigma_from_air(stack_of(magnitude, 1 + np.arange(12))).sigma is None


def test_images_of_zeros_are_closed() -> None:
    assert sigma_from_air(stack_of(np.zeros((*SHAPE, 3)), np.array([1.0, 2, 3]))).sigma is None


@pytest.mark.parametrize("n_echoes", [3, 4, 6, 12])
@pytest.mark.parametrize("spacing", [0.7, 2.3])
def test_air_of_equal_echoes_shows_no_scaling_of_echoes(n_echoes: int, spacing: float) -> None:
    # A trend would be told as a fault of the export: none here, whatever the number of echoes.
    scene = abdomen(times_ms=spacing * np.arange(1, n_echoes + 1))
    for seed in range(4):
        found = sigma_from_air(scene.stack(scene.magnitude(4.0, seed=seed)))
        assert abs(found.echo_scale_trend_per_s) < 5.0


@pytest.mark.parametrize("growth_per_s", [15.0, 40.0, 80.0])
def test_echoes_scaled_one_by_one_show_in_the_air(growth_per_s: float) -> None:
    # Each echo stretched to its own full range: noise grows as the signal should fall.
    scene = abdomen()
    magnitude = scene.magnitude(4.0) * np.exp(1e-3 * growth_per_s * scene.times_ms)
    found = sigma_from_air(scene.stack(magnitude))
    assert found.echo_scale_trend_per_s == pytest.approx(growth_per_s, rel=0.25)
