"""The noise that is made, against SciPy's distributions and closed moments."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest
from scipy import stats

from liverfe.phantom import Phantom, Recipe, make_phantom, scan_again
from liverfe.phantom.signal import received

N_DRAWS = 200_000
P_LOW = 1e-4
"""Seeds are fixed, so this is no lottery: a right sample passes for good."""


def draw(amplitude: float, *, sigma: float, n_channels: int) -> np.ndarray:
    clean = np.full((N_DRAWS, 1, 1), amplitude, dtype=np.float32)
    rng = np.random.default_rng(11)
    magnitude, _ = received(clean, sigma=sigma, n_channels=n_channels, rng=rng)
    return magnitude.ravel().astype(np.float64)


@pytest.mark.parametrize("ratio", [0.0, 0.5, 2.0, 10.0])
def test_one_channel_is_rician_as_scipy_has_it(ratio: float) -> None:
    drawn = draw(ratio * 5.0, sigma=5.0, n_channels=1)
    assert stats.kstest(drawn, stats.rice(ratio, scale=5.0).cdf).pvalue > P_LOW


# Mean and SD over sigma of the Rician distribution at A/sigma 1, 3 and 10: 50-digit computation
# from E[M] = sigma sqrt(pi/2) 1F1(-1/2; 1; -a^2/2) and E[M^2] = A^2 + 2 sigma^2.
@pytest.mark.parametrize(
    ("ratio", "mean", "sd"),
    [
        (1.0, 1.54857246055, 0.7758371829),
        (3.0, 3.1725772879, 0.9668264334),
        (10.0, 10.0501269367, 0.9974710806),
    ],
)
def test_rician_moments_are_the_tabulated_ones(ratio: float, mean: float, sd: float) -> None:
    drawn = draw(ratio * 4.0, sigma=4.0, n_channels=1) / 4.0
    assert drawn.mean() == pytest.approx(mean, abs=5 * sd / math.sqrt(N_DRAWS))
    assert drawn.std() == pytest.approx(sd, rel=5 / math.sqrt(2 * N_DRAWS))


@pytest.mark.parametrize("n_channels", [2, 8, 16])
@pytest.mark.parametrize("ratio", [0.0, 4.0])
def test_many_channels_are_noncentral_chi_as_scipy_has_it(n_channels: int, ratio: float) -> None:
    power = (draw(ratio * 3.0, sigma=3.0, n_channels=n_channels) / 3.0) ** 2
    expected = stats.ncx2(2 * n_channels, ratio**2) if ratio else stats.chi2(2 * n_channels)
    assert stats.kstest(power, expected.cdf).pvalue > P_LOW


def test_air_of_a_phantom_is_rayleigh_noise_of_the_recipes_sigma(phantom: Phantom) -> None:
    air = phantom.magnitude[phantom.structures.labels == 0].ravel()
    assert len(air) > 20_000
    assert stats.kstest(air, stats.rayleigh(scale=8.0).cdf).pvalue > P_LOW


def test_noise_of_different_echoes_and_scans_is_independent(phantom: Phantom) -> None:
    again = scan_again(phantom, np.random.default_rng(99))
    air = phantom.structures.labels == 0
    bound = 4.0 / math.sqrt(air.sum())
    for other in (phantom.magnitude[air, 1], again.magnitude[air, 0]):
        assert abs(np.corrcoef(phantom.magnitude[air, 0], other)[0, 1]) < bound
    assert np.array_equal(again.r2star_per_s, phantom.r2star_per_s, equal_nan=True)


def test_noise_of_neighbouring_voxels_is_independent(phantom: Phantom) -> None:
    # The first rows lie in air on all slices: see the anatomy's own tests.
    rows = phantom.magnitude[:, :4, :, :]
    left, right = rows[:-1].ravel(), rows[1:].ravel()
    assert abs(np.corrcoef(left, right)[0, 1]) < 4.0 / math.sqrt(len(left))


def test_without_noise_the_magnitude_is_the_clean_signal(recipe: Recipe) -> None:
    quiet = dataclasses.replace(recipe, noise=dataclasses.replace(recipe.noise, sigma=0.0))
    phantom = make_phantom(quiet, np.random.default_rng(1), with_phase=True)
    np.testing.assert_allclose(phantom.magnitude, phantom.clean_magnitude(), rtol=1e-6)
    inside = phantom.s0 > 0
    assert phantom.phase_rad is not None
    made = phantom.magnitude * np.exp(1j * phantom.phase_rad)
    np.testing.assert_allclose(made[inside], phantom.clean_complex()[inside], rtol=2e-5)


def test_phase_scatters_by_sigma_over_signal_where_the_signal_is_strong(phantom: Phantom) -> None:
    # Error propagation for a/sigma >> 1 (here 97): SD of phase = sigma / A.
    fat = phantom.structures.mask(("subcutaneous fat",))
    clean = phantom.clean_complex()[fat, 0]
    assert phantom.phase_rad is not None
    error = np.angle(np.exp(1j * phantom.phase_rad[fat, 0]) / clean)
    expected = float(8.0 / np.abs(clean).mean())
    assert error.std() == pytest.approx(expected, rel=4 / math.sqrt(2 * len(error)))
    assert abs(error.mean()) < 4 * expected / math.sqrt(len(error))


def test_asking_for_the_phase_changes_no_magnitude(recipe: Recipe, phantom: Phantom) -> None:
    plain = make_phantom(recipe, np.random.default_rng(recipe.seed))
    assert plain.phase_rad is None
    assert np.array_equal(plain.magnitude, phantom.magnitude)


def test_rounding_for_storage_is_at_most_half_a_count(phantom: Phantom) -> None:
    error = phantom.stored_signal() - phantom.magnitude
    assert np.abs(error).max() <= 0.5 * 0.5 * (1 + 1e-4)
    assert error.std() == pytest.approx(0.5 / math.sqrt(12), rel=0.02)


def test_other_iron_leaves_the_noise_as_it_was(vary, phantom: Phantom) -> None:
    recipe = vary(("heterogeneity_cv = 0.2", "heterogeneity_cv = 0.1"))
    other = make_phantom(recipe, np.random.default_rng(recipe.seed))
    unchanged = ~phantom.structures.mask(("liver right", "liver left"))
    assert np.array_equal(other.magnitude[unchanged], phantom.magnitude[unchanged])
    assert not np.array_equal(other.magnitude[~unchanged], phantom.magnitude[~unchanged])
