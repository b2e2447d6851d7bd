"""Channels from the tissue alone: told where echoes are dark, else bounded, never wrong."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.noise import NoiseLevel, estimate_noise
from tests.noise.abdomens import Abdomen, abdomen

pytestmark = pytest.mark.slow

SHAPE = (96, 80, 6)


def without_air(scene: Abdomen, sigma: float, *, n: int, seed: int = 0) -> NoiseLevel:
    magnitude = scene.magnitude(sigma, n=n, seed=seed)
    magnitude[~scene.body] = 0.0
    return estimate_noise(scene.stack(magnitude))


@pytest.mark.parametrize("n", [1, 2, 4, 8, 16, 32])
@pytest.mark.parametrize("snr", [20.0, 50.0])
@pytest.mark.parametrize("rate", [300.0, 800.0])
def test_the_floor_of_a_dark_liver_tells_the_channels(n: int, snr: float, rate: float) -> None:
    noise = without_air(abdomen(liver_per_s=rate, shape=SHAPE), 400.0 / snr, n=n)
    assert noise.channels_between is None
    assert abs(noise.n_channels - n) <= 0.07 * n
    assert noise.sigma == pytest.approx(400.0 / snr, rel=0.03)
    assert noise.findings == ()


@pytest.mark.parametrize("n", [1, 8, 32])
@pytest.mark.parametrize("snr", [20.0, 50.0, 100.0])
@pytest.mark.parametrize("rate", [30.0, 120.0])
def test_where_no_echo_is_dark_the_truth_lies_within_the_range(
    n: int, snr: float, rate: float
) -> None:
    noise = without_air(abdomen(liver_per_s=rate, shape=SHAPE), 400.0 / snr, n=n)
    low, high = noise.channels_between or (noise.n_channels, noise.n_channels)
    assert low - 0.1 * n <= n <= high + 0.1 * n
    # Thirty-two channels at an SNR of 20 and nothing dark: one is not ruled out, and sigma with one
    # is 6 % low. The finding says that the number is open.
    allowed = 0.08 if (n, snr, rate) == (32, 20.0, 30.0) else 0.03
    assert noise.sigma == pytest.approx(400.0 / snr, rel=allowed)


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize(
    "fault", [{"fast_share": 0.3}, {"liver_fat": 0.2}, {"fast_share": 0.5, "fat_layer": True}]
)
def test_curved_decays_and_fat_do_not_make_channels(fault: dict, seed: int) -> None:
    # The likelihood of one exponential would take these for ten channels and more.
    noise = without_air(abdomen(liver_per_s=60.0, shape=SHAPE, **fault), 16.0, n=1, seed=seed)
    assert noise.n_channels == 1


def test_straight_decays_leave_less_room() -> None:
    # At 120 /s and an SNR of 100 no echo is dark; 64 channels would still bend all decays.
    noise = without_air(abdomen(liver_per_s=120.0, shape=(128, 104, 8)), 4.0, n=1)
    assert noise.channels_between is not None
    assert noise.channels_between[1] <= 12


def test_given_channels_leave_nothing_open() -> None:
    scene = abdomen(liver_per_s=30.0)
    magnitude = scene.magnitude(8.0, n=4)
    magnitude[~scene.body] = 0.0
    noise = estimate_noise(scene.stack(magnitude), n_channels=4)
    assert (noise.n_channels, noise.channels_between, noise.findings) == (4, None, ())


def test_the_air_is_not_believed_where_dark_tissue_has_another_floor() -> None:
    # Air as of eight channels with the right sigma, liver as of one: two reconstructions.
    scene = abdomen(liver_per_s=500.0, shape=SHAPE)
    air, tissue = scene.magnitude(8.0, n=8), scene.magnitude(8.0, seed=1)
    noise = estimate_noise(scene.stack(np.where(scene.body[..., None], tissue, air)))
    assert noise.method == "residual"
    assert noise.n_channels == 1
    assert noise.sigma == pytest.approx(8.0, rel=0.03)


@pytest.mark.parametrize("n", [1, 8, 32])
@pytest.mark.parametrize("rate", [30.0, 800.0])
def test_what_a_mask_left_of_the_air_still_tells_the_channels(n: int, rate: float) -> None:
    # A round field of view: corners are zero, the rest of the air is not.
    scene = abdomen(liver_per_s=rate, shape=SHAPE)
    magnitude = scene.magnitude(8.0, n=n)
    x, y = (np.linspace(-1, 1, size) for size in SHAPE[:2])
    magnitude[x[:, None] ** 2 + y**2 > 0.95] = 0.0
    noise = estimate_noise(scene.stack(magnitude))
    assert noise.n_channels == pytest.approx(n, abs=0.05 * n)
    assert noise.channels_between is None
    assert noise.sigma == pytest.approx(8.0, rel=0.03)
