"""Statistics of samples of which some are only known to lie beyond a limit."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import ndimage, stats

from liverfe.regions.statistics import (
    censored_quantile,
    correlation_inflation,
    median_interval,
    outliers,
)


@given(
    st.lists(st.floats(-1e6, 1e6), min_size=1, max_size=60),
    st.floats(0.0, 1.0),
)
def test_without_censoring_the_quantile_is_that_of_numpy(values: list[float], share: float) -> None:
    ordered = np.sort(np.array(values))
    assert censored_quantile(ordered, share) == pytest.approx(
        float(np.quantile(ordered, share)), rel=1e-9, abs=1e-6
    )


def test_the_median_does_not_depend_on_how_far_censored_values_lie() -> None:
    values = np.sort(np.random.default_rng(1).normal(300.0, 30.0, 99))
    whole = float(np.median(values))
    censored = np.where(values > 320.0, np.inf, values)
    assert censored_quantile(np.sort(censored), 0.5) == whole


@pytest.mark.parametrize("n", [31, 100, 401])
def test_the_interval_of_a_median_covers_as_often_as_it_says(n: int) -> None:
    """Against the sampling distribution itself: a skewed one, since none is assumed."""
    rng = np.random.default_rng(11)
    truth = float(np.log(2.0))  # median of the unit exponential
    hits = 0
    trials = 1500
    for _ in range(trials):
        low, high = median_interval(np.sort(rng.exponential(size=n)), level=0.95, inflation=1.0)
        hits += low <= truth <= high
    # 1500 trials leave a standard error of 0.6 %.
    assert 0.93 <= hits / trials <= 0.97


def test_the_interval_of_a_median_has_the_ranks_of_the_binomial() -> None:
    """Ranks by the normal approximation lie within one of SciPy's exact binomial ones."""
    n = 200
    low, high = median_interval(np.arange(n, dtype=float), level=0.95, inflation=1.0)
    exact_low, exact_high = stats.binom.interval(0.95, n, 0.5)
    assert low == pytest.approx(exact_low, abs=1.5)
    assert high == pytest.approx(exact_high - 1, abs=1.5)


def test_an_interval_that_reaches_into_censored_values_is_open() -> None:
    values = np.concatenate([np.linspace(100.0, 200.0, 60), np.full(55, np.inf)])
    low, high = median_interval(values, level=0.95, inflation=1.0)
    assert np.isfinite(low)
    assert high == np.inf


def test_outliers_are_those_beyond_scaled_mads_and_never_censored() -> None:
    """SciPy's scaled MAD is the second opinion."""
    values = np.concatenate([np.random.default_rng(3).normal(300.0, 20.0, 500), [10.0, 900.0]])
    scale = stats.median_abs_deviation(values, scale="normal")
    expected = np.abs(values - np.median(values)) > 3.0 * scale
    assert np.array_equal(outliers(values, 3.0), expected)
    with_censored = np.append(values, [np.inf, np.inf])
    assert not outliers(with_censored, 3.0)[-2:].any()


def test_independent_voxels_count_in_full() -> None:
    noise = np.random.default_rng(5).normal(size=(60, 60, 2))
    assert correlation_inflation(noise, np.ones(noise.shape, bool)) == pytest.approx(1.0, abs=0.15)


def test_zero_filled_voxels_count_as_a_quarter() -> None:
    """Methods sheet 5.2 [computed]: interpolation by two leaves N/4 effective voxels."""
    rng = np.random.default_rng(6)
    small = rng.normal(size=(64, 64)) + 1j * rng.normal(size=(64, 64))
    padded = np.zeros((128, 128), complex)
    padded[32:96, 32:96] = np.fft.fftshift(np.fft.fft2(small))
    noise = np.fft.ifft2(np.fft.ifftshift(padded)).real[..., None]
    inflation = correlation_inflation(noise, np.ones(noise.shape, bool))
    # On the safe side of 4: negative correlations further out are not counted back.
    assert 3.7 <= inflation <= 6.0


def test_smoothed_noise_widens_the_interval() -> None:
    noise = ndimage.gaussian_filter(np.random.default_rng(8).normal(size=(80, 80, 1)), (1, 1, 0))
    assert correlation_inflation(noise, np.ones(noise.shape, bool)) > 6.0
