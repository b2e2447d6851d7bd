"""Statistics of samples of which some are only known to lie beyond a limit."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from liverfe.regions.statistics import censored_quantile, outliers


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


@pytest.mark.parametrize(
    ("values", "expected"),
    [
        ([-np.inf, -np.inf, 3.0, 4.0], -np.inf),
        ([1.0, 2.0, np.inf, np.inf], np.inf),
        ([-np.inf, -np.inf, np.inf, np.inf], np.inf),
    ],
)
def test_a_median_between_measured_and_censored_voxels_is_censored(
    values: list[float], expected: float
) -> None:
    assert censored_quantile(np.array(values), 0.5) == expected


def test_outliers_are_those_beyond_scaled_mads_and_never_censored() -> None:
    """SciPy's scaled MAD is the second opinion."""
    values = np.concatenate([np.random.default_rng(3).normal(300.0, 20.0, 500), [10.0, 900.0]])
    scale = stats.median_abs_deviation(values, scale="normal")
    expected = np.abs(values - np.median(values)) > 3.0 * scale
    assert np.array_equal(outliers(values, 3.0), expected)
    with_censored = np.append(values, [np.inf, np.inf])
    assert not outliers(with_censored, 3.0)[-2:].any()
