"""How well a region's own median is known, against simulated medians and closed forms."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from liverfe.regions.correlation import WHITE, NoiseCorrelation
from liverfe.regions.precision import MedianPrecision, median_precision, spread
from tests.regions.patches import Patch, interpolated_noise, square

pytestmark = pytest.mark.slow


def known_of(values: np.ndarray, mask: np.ndarray, **more: object) -> MedianPrecision:
    """Precision of values whose noise has SD 1."""
    more = {"correlation": WHITE, **more}
    return median_precision(values, mask, np.ones(1), **more)


def test_without_iron_of_its_own_it_is_the_error_of_a_median() -> None:
    """SE of the median of normal noise: sqrt(pi / 2 N) (methods sheet 5.2: 1.2533 SE of mean)."""
    mask = np.ones((40, 40, 1), dtype=bool)
    # Quantiles of the normal distribution: a sample without chance.
    values = 200.0 + stats.norm.ppf((np.arange(1600) + 0.5) / 1600)
    assert known_of(values, mask).se_per_s == pytest.approx(1.2533 / 40.0, rel=0.03)


@pytest.mark.parametrize("ratio", [0.0, 1.0, 3.0, 10.0])
@pytest.mark.parametrize("side", [4, 5, 20])
def test_it_is_the_scatter_about_the_true_median_of_the_same_voxels(
    side: int, ratio: float
) -> None:
    """Iron of SD `ratio` under noise of SD 1: the error of 1500 simulated medians."""
    rng = np.random.default_rng(side + round(ratio))
    mask = np.ones((side, side, 1), dtype=bool)
    errors, stated = [], []
    for _ in range(1500 if side < 20 else 500):
        true = 100.0 + ratio * rng.standard_normal(side**2)
        values = true + rng.standard_normal(side**2)
        errors.append(np.median(values) - np.median(true))
        stated.append(known_of(values, mask).se_per_s)
    assert np.std(errors) == pytest.approx(np.sqrt(np.mean(np.square(stated))), rel=0.09)


def test_interpolated_noise_counts_neighbours_as_one() -> None:
    rng = np.random.default_rng(3)
    along = np.sinc(np.arange(9) / 2.0)
    sinc = NoiseCorrelation(in_plane=np.outer(along, along), between_slices=np.ones(1))
    mask = square(64, 20)
    errors, stated = [], []
    for _ in range(20):
        noise = interpolated_noise(rng, 64, 24, 2.0)
        for field in (noise.real, noise.imag):
            for e in range(24):
                values = field[..., e][mask[..., 0]]
                errors.append(np.median(values))
                stated.append(known_of(100.0 + values, mask, correlation=sinc).se_per_s)
    assert np.std(errors) == pytest.approx(np.mean(stated), rel=0.08)


@pytest.mark.parametrize("cv", [0.1, 0.3])
def test_spread_of_iron_is_what_noise_does_not_explain(cv: float) -> None:
    rng = np.random.default_rng(4)
    true = rng.normal(200.0, 200.0 * cv, 1600)
    values = true + 8.0 * rng.standard_normal(1600)
    mask = np.ones((40, 40, 1), dtype=bool)
    found = median_precision(values, mask, np.full(3, 8.0), WHITE)
    assert found.sd_biological_per_s == pytest.approx(200.0 * cv, rel=0.08)


def test_spread_of_iron_is_zero_where_noise_explains_all() -> None:
    """200 regions of even iron: false alarms within 1 %."""
    rng = np.random.default_rng(5)
    mask = np.ones((15, 15, 1), dtype=bool)
    found = [known_of(100.0 + rng.standard_normal(225), mask) for _ in range(200)]
    assert sum(known.sd_biological_per_s > 0.0 for known in found) <= 2


def test_noise_that_grows_with_r2star_draws_the_median_of_uneven_iron_down() -> None:
    """Fits of simulated decays near the limit, iron gamma distributed with a CV of 0.2."""
    rng = np.random.default_rng(6)
    patch = Patch(r2star_per_s=700.0, side=20, cv=0.2)
    drawn, stated = [], []
    for _ in range(30):
        summary, truth = patch.measure(rng)
        r2star = summary.r2star
        drawn.append(truth - r2star.value)
        assert r2star.low is not None
        if r2star.high is not None:
            stated.append(((r2star.high - r2star.value) - (r2star.value - r2star.low)) / 2.0)
    # Measured to 1.5 /s by these thirty; 0.5 to 1 % of R2*.
    assert 2.0 < np.mean(drawn) < 10.0
    assert np.mean(stated) == pytest.approx(np.mean(drawn), abs=3.5)


def test_even_iron_is_not_drawn_down() -> None:
    mask = np.ones((40, 40, 1), dtype=bool)
    even = 800.0 + 80.0 * stats.norm.ppf((np.arange(1600) + 0.5) / 1600)
    assert median_precision(even, mask, np.full(1, 80.0), WHITE, slope=0.2).drawn_down_per_s < 1.0


def test_the_robust_spread_is_the_sd_and_heeds_no_outliers() -> None:
    rng = np.random.default_rng(7)
    values = rng.normal(300.0, 20.0, 4000)
    assert spread(values) == pytest.approx(values.std(), rel=0.03)
    with_vessels = np.concatenate([values, np.full(200, 15.0), np.full(100, np.inf)])
    assert spread(with_vessels) == pytest.approx(20.0, rel=0.12)
    half_over = np.where(values > 301.0, np.inf, values)
    assert spread(half_over) == pytest.approx(20.0, rel=0.1)
