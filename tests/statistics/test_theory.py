"""The theory that the rows are judged by is that of the methods sheet, and of SciPy's densities."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate, stats

from liverfe.fit import fit_rows
from tests.statistics.theory import (
    bound_per_s,
    information,
    least_rmse_per_s,
    log_density,
    measurable_per_s,
    score_in_log_amplitude,
)
from tests.statistics.truth import ECHO_SETS_MS, TWELVE_MS, decay, magnitudes, make_scan

# Methods sheet 4.1 [computed]: Fisher information J(a) of a Rician magnitude.
INFORMATION = {
    0.25: 0.058872, 0.5: 0.201696, 0.75: 0.368873, 1: 0.521447, 1.25: 0.644652, 1.5: 0.737547,
    2: 0.852632, 2.5: 0.910245, 3: 0.940151, 4: 0.967605, 5: 0.979562, 6: 0.985906, 8: 0.992124,
    10: 0.994974, 20: 0.998748,
}  # fmt: skip

# Methods sheet 4.2 [computed]: Rician Cramér-Rao SD of R2* at 50, 100, 200, 500, 800, 1000, 1500.
RATES = (50, 100, 200, 500, 800, 1000, 1500)
BOUNDS = [
    ("12 x 0.8 from 1.0", 20, (6.882, 9.118, 16.08, 69.58, 185.7, 320.2, 1118)),
    ("12 x 0.8 from 1.0", 50, (2.750, 3.640, 6.371, 25.98, 67.77, 114.3, 361.5)),
    ("12 x 0.8 from 1.0", 100, (1.375, 1.819, 3.182, 12.74, 32.97, 55.22, 169.0)),
    ("12 x 1.13 from 0.99", 50, (2.139, 3.117, 6.411, 29.37, 77.15, 132.6, 459.8)),
    ("8 x 1.2 from 1.2", 50, (3.384, 4.484, 7.887, 33.51, 94.75, 172.4, 738)),
    ("8 x 2.2 from 1.3", 50, (2.230, 3.582, 8.481, 45.57, 154.1, 351.1, 6823)),
    ("12 x 0.7 from 0.8", 50, (3.024, 3.848, 6.247, 22.28, 54.49, 87.64, 240.3)),
]


@pytest.mark.parametrize("a", INFORMATION)
def test_information_is_tabulated(a: float) -> None:
    assert information(a) == pytest.approx(INFORMATION[a], abs=6e-7)


@pytest.mark.parametrize(("echo_set", "snr", "bounds"), BOUNDS)
def test_bounds_are_tabulated(echo_set: str, snr: float, bounds: tuple[float, ...]) -> None:
    found = [bound_per_s(ECHO_SETS_MS[echo_set], rate, snr) for rate in RATES]
    assert found == pytest.approx(bounds, rel=6e-4)


@pytest.mark.parametrize(
    ("echo_set", "limits"),
    [
        # Methods sheet 4.3, on its grid of 10 1/s: upper end at SNR 20, 30, 50, 100.
        ("12 x 0.8 from 1.0", (329, 559, 909, 1408)),
        ("12 x 1.13 from 0.99", (280, 489, 819, 1278)),
        ("8 x 2.2 from 1.3", (160, 310, 529, 829)),
    ],
)
def test_the_measurable_range_ends_where_it_is_tabulated(
    echo_set: str, limits: tuple[float, ...]
) -> None:
    found = [measurable_per_s(ECHO_SETS_MS[echo_set], snr)[1] for snr in (20, 30, 50, 100)]
    assert found == pytest.approx(limits, abs=11)


@pytest.mark.parametrize("n", [1, 3, 16])
def test_the_density_is_scipys(n: int) -> None:
    m, a = np.meshgrid(np.linspace(0.3, 12.0, 40), np.linspace(0.2, 9.0, 12))
    # M² of n channels is noncentral chi-square with 2n degrees (methods sheet 1.2).
    ours, theirs = log_density(m, a, n), stats.ncx2.logpdf(m**2, 2 * n, a**2) + np.log(2 * m)
    assert np.abs(ours - theirs).max() < 1e-7
    if n == 1:
        assert np.abs(ours - stats.rice.logpdf(m, a)).max() < 1e-9
    step = 1e-5
    slope = (log_density(m, a * (1 + step), n) - log_density(m, a * (1 - step), n)) / (2 * step)
    assert np.abs(score_in_log_amplitude(m, a, n) - slope).max() < 1e-5


def test_no_estimator_beats_the_least_rmse_where_it_is_known_exactly() -> None:
    """Far from the noise floor all is Gaussian: there the least RMSE is the Cramér-Rao SD."""
    rng = np.random.default_rng(1)
    bound = bound_per_s(TWELVE_MS, 100.0, 500.0)
    least = least_rmse_per_s(TWELVE_MS, 100.0, 500.0, rng, trials=8000)
    assert least / bound == pytest.approx(1.0, abs=0.02)


@pytest.mark.slow
def test_near_the_end_of_the_range_the_least_rmse_rises_above_the_bound() -> None:
    """Maximum likelihood, whose median is the truth, is where the lemma says the best can be."""
    times_ms = ECHO_SETS_MS["8 x 2.2 from 1.3"]
    rate = measurable_per_s(times_ms, 100.0)[1]
    rng = np.random.default_rng(2)
    bound = bound_per_s(times_ms, rate, 100.0)
    least = least_rmse_per_s(times_ms, rate, 100.0, rng, trials=20_000) / bound
    signal = magnitudes(np.tile(decay(100.0, rate, times_ms), (60_000, 1)), rng)
    found = fit_rows(signal, times_ms, np.ones(1), 1).r2star_per_s.astype(float)
    reached = float(np.sqrt(np.nanmean((found - rate) ** 2)) / bound)
    assert least > 1.05
    assert reached == pytest.approx(least, rel=0.015)


def test_noise_of_the_scans_is_what_it_says() -> None:
    """Central moments of noise: mean M² = 2 n sigma² (Constantinides 1997 [abstract])."""
    for choices in ({}, {"interpolated": True}, {"n": 4}):
        scan = make_scan(100.0, np.random.default_rng(3), snr=50.0, slices=1, **choices)
        air = scan.stack.magnitude[~scan.body].astype(float)
        n = choices.get("n", 1)
        assert np.sqrt((air**2).mean() / (2 * n)) == pytest.approx(2.0, rel=0.02)
    scan = make_scan(100.0, np.random.default_rng(3), snr=50.0, slices=1, ramp=3.0)
    assert scan.sigma.max() / scan.sigma.min() == pytest.approx(3.0)
    assert scan.sigma.mean() == pytest.approx(2.0)


def test_zero_filled_noise_counts_a_quarter() -> None:
    """Methods sheet 5.2 [computed]: 20 x 20 voxels of doubled matrix count as 103.3."""
    rng = np.random.default_rng(4)
    means = []
    for _ in range(12):
        scan = make_scan(100.0, rng, snr=500.0, slices=1, interpolated=True)
        late = scan.stack.magnitude.astype(float) - decay(100.0, 100.0, TWELVE_MS)
        means += [late[scan.tiles == k].mean(axis=0) for k in range(1, 10)]
    variance = np.var(np.concatenate([m[:4] for m in means]))
    assert 0.2**2 / variance == pytest.approx(103.3, rel=0.25)


def test_the_bound_is_the_curvature_of_the_likelihood() -> None:
    """J(1) again, by adaptive quadrature over SciPy's Rician density."""

    def integrand(m: float) -> float:
        return float(stats.rice.pdf(m, 1.0) * score_in_log_amplitude(m, 1.0) ** 2)

    assert integrate.quad(integrand, 1e-9, 12.0)[0] == pytest.approx(0.521447, abs=1e-6)
