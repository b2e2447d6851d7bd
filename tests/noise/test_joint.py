"""Sigma by the joint likelihood: right to 3 % without air, unlike plain maximum likelihood."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from liverfe.errors import StudyRefused
from liverfe.noise import estimate_noise
from liverfe.study.decay_likelihood import decay_likelihood
from tests.noise.abdomens import abdomen

pytestmark = pytest.mark.slow

SHAPE = (96, 80, 6)


def plain_likelihood(
    signal: np.ndarray, times_ms: np.ndarray, sigma: np.ndarray, n: int
) -> tuple[np.ndarray, np.ndarray]:
    """The same without the adjustment of Cox & Reid."""
    log_l, log_det = decay_likelihood(signal, times_ms, sigma, n)
    return log_l, 0.0 * log_det


@pytest.mark.parametrize("rate", [35.0, 300.0])
@pytest.mark.parametrize("n", [1, 4])
@pytest.mark.parametrize("times", [1.2 * np.arange(1, 5), 1.0 + 1.2 * np.arange(12)])
def test_sigma_is_right_to_3_percent(rate: float, n: int, times: np.ndarray) -> None:
    scene = abdomen(liver_per_s=rate, shape=SHAPE, times_ms=times)
    magnitude = scene.magnitude(10.0, n=n)
    magnitude[~scene.body] = 0.0
    noise = estimate_noise(
        scene.stack(magnitude), method="joint", n_channels=n, likelihood=decay_likelihood
    )
    assert noise.method == "joint"
    assert noise.sigma == pytest.approx(10.0, rel=0.03)


@pytest.mark.parametrize("n_echoes", [4, 6])
def test_plain_maximum_likelihood_is_low_by_the_degrees_of_freedom(n_echoes: int) -> None:
    # Neyman & Scott 1948: two parameters a voxel, so sqrt((E - 2) / E).
    scene = abdomen(shape=SHAPE, times_ms=1.2 * np.arange(1, n_echoes + 1))
    stack = scene.stack(scene.magnitude(4.0))
    plain = estimate_noise(stack, method="joint", likelihood=plain_likelihood).sigma
    assert plain / 4.0 == pytest.approx(np.sqrt((n_echoes - 2) / n_echoes), abs=0.02)
    adjusted = estimate_noise(stack, method="joint", likelihood=decay_likelihood).sigma
    assert adjusted / 4.0 == pytest.approx(1.0, abs=0.03)


def test_its_standard_error_is_that_of_its_scatter() -> None:
    scene = abdomen(shape=SHAPE)
    found = [
        estimate_noise(
            scene.stack(scene.magnitude(8.0, seed=seed)), method="joint",
            likelihood=decay_likelihood,
        )
        for seed in range(8)
    ]  # fmt: skip
    scatter = np.std([noise.sigma / 8.0 for noise in found], ddof=1)
    claimed = float(np.mean([noise.relative_sd for noise in found]))
    # Eight draws: their SD lies below 1.5 times the true one with 98 % (chi-square, 7 degrees).
    assert scatter < claimed * np.sqrt(stats.chi2.ppf(0.999, 7) / 7)


def test_it_stands_in_where_no_echo_is_bright_enough_for_residuals() -> None:
    # SNR of 7 throughout, and no air in view.
    scene = abdomen(in_air=False, body_per_s=60.0, liver_per_s=60.0, shape=SHAPE)
    noise = estimate_noise(scene.stack(scene.magnitude(57.0)), likelihood=decay_likelihood)
    assert noise.method == "joint"
    assert noise.sigma == pytest.approx(57.0, rel=0.05)
    assert {way.method for way in noise.candidates} == {"air", "residual", "joint"}


def test_without_a_likelihood_the_way_is_closed() -> None:
    scene = abdomen()
    with pytest.raises(StudyRefused):
        estimate_noise(scene.stack(scene.magnitude(4.0)), method="joint")


def test_two_echoes_leave_nothing_to_be_likely() -> None:
    scene = abdomen(times_ms=np.array([1.2, 4.8]))
    with pytest.raises(StudyRefused):
        estimate_noise(
            scene.stack(scene.magnitude(4.0)), method="joint", likelihood=decay_likelihood
        )


def test_it_is_heard_where_air_and_residuals_differ() -> None:
    x, y = (np.linspace(-1, 1, size) for size in SHAPE[:2])
    inside = (x[:, None] ** 2 + y**2 < 0.6)[..., None, None]
    scene = abdomen(shape=SHAPE)
    magnitude = scene.magnitude(4.0 * np.where(inside, 1.6, 1.0))
    noise = estimate_noise(scene.stack(magnitude), likelihood=decay_likelihood)
    joint = next(way for way in noise.candidates if way.method == "joint")
    assert joint.sigma == pytest.approx(6.4, rel=0.05)
    assert noise.method == "residual"
