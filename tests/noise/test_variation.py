"""A map of sigma where it varies, right to 3 % in the liver; a scalar where it does not."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.noise import NoiseLevel, estimate_noise
from tests.noise.abdomens import Abdomen, abdomen, liver_mask

pytestmark = pytest.mark.slow

SHAPE = (96, 80, 6)
LIVER = liver_mask(SHAPE)
ALONG, ACROSS = (np.linspace(-1, 1, size) for size in SHAPE[:2])
FLAT = np.ones(SHAPE)
# Methods sheet 8.1: a ramp of the g-factor of 1 to 3; along either axis, and a hump in the middle.
RAMPS = {
    "columns": (2.0 + ALONG)[:, None, None] * FLAT,
    "rows": (2.0 + ACROSS)[None, :, None] * FLAT,
    "hump": (1 + np.exp(-(ALONG[:, None] ** 2 + ACROSS**2) / 0.3))[..., None] * FLAT,
}


def share_in_liver(noise: NoiseLevel, sigma: np.ndarray) -> float:
    """What is found over the truth, mean over the liver."""
    found = noise.sigma if noise.sigma_map is None else noise.sigma_map[LIVER]
    return float(np.mean(found / sigma[LIVER]))


def measured(scene: Abdomen, sigma: np.ndarray, *, n: int = 1, seed: int = 0) -> NoiseLevel:
    return estimate_noise(scene.stack(scene.magnitude(sigma[..., None], n=n, seed=seed)))


@pytest.mark.parametrize("ramp", RAMPS)
@pytest.mark.parametrize("rate", [30.0, 120.0, 300.0])
def test_a_ramp_of_three_is_followed_within_3_percent(ramp: str, rate: float) -> None:
    sigma = 8.0 * RAMPS[ramp] / RAMPS[ramp].mean()
    noise = measured(abdomen(liver_per_s=rate, shape=SHAPE), sigma)
    assert noise.sigma_map is not None
    assert noise.sigma_map.shape == SHAPE
    allowed = 0.05 if ramp == "hump" else 0.03  # no polynomial of degree four is a hump
    assert share_in_liver(noise, sigma) == pytest.approx(1.0, abs=allowed)
    assert noise.n_channels == 1
    assert {finding.level for finding in noise.findings} <= {"note"}


@pytest.mark.parametrize("n", [8, 32])
@pytest.mark.parametrize("rate", [300.0, 800.0])
def test_a_ramp_of_many_channels_is_followed_too(n: int, rate: float) -> None:
    sigma = 8.0 * RAMPS["columns"] / 2.0
    noise = measured(abdomen(liver_per_s=rate, shape=SHAPE), sigma, n=n)
    assert share_in_liver(noise, sigma) == pytest.approx(1.0, abs=0.03)
    assert noise.n_channels == pytest.approx(n, rel=0.1)


def test_sigma_is_the_median_of_its_map_over_the_tissue() -> None:
    scene = abdomen(shape=SHAPE)
    noise = measured(scene, 4.0 * RAMPS["columns"])
    assert noise.sigma_map is not None
    assert noise.sigma == pytest.approx(float(np.median(noise.sigma_map[scene.body])), rel=0.03)


@pytest.mark.parametrize("snr", [20.0, 100.0])
@pytest.mark.parametrize("in_air", [True, False])
@pytest.mark.parametrize("rate", [30.0, 300.0])
def test_even_noise_has_no_map(snr: float, in_air: bool, rate: float) -> None:
    scene = abdomen(liver_per_s=rate, shape=SHAPE, in_air=in_air)
    noise = measured(scene, 400.0 / snr * FLAT)
    assert noise.sigma_map is None
    assert "noise-varies" not in {finding.code for finding in noise.findings}


@pytest.mark.parametrize("fault", [{"liver_fat": 0.2}, {"fast_share": 0.3, "fat_layer": True}])
def test_fat_and_curved_decays_do_not_pass_for_variation(fault: dict) -> None:
    scene = abdomen(liver_per_s=60.0, shape=SHAPE, **fault)
    magnitude = scene.magnitude(4.0)
    magnitude[~scene.body] = 0.0
    assert estimate_noise(scene.stack(magnitude)).sigma_map is None


def test_the_map_is_held_at_the_border_of_the_tissue() -> None:
    scene = abdomen(shape=SHAPE)
    noise = measured(scene, 4.0 * RAMPS["columns"])
    assert noise.sigma_map is not None
    inside = noise.sigma_map[scene.body]
    assert noise.sigma_map.min() >= 0.9 * inside.min()
    assert noise.sigma_map.max() <= 1.1 * inside.max()
