"""The estimator of the house, against truth, SciPy's likelihood, simulations and the bound."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import optimize, special, stats

from liverfe.fit import FitOutcome
from tests.fit.decays import PROTOCOLS_MS, TWELVE_MS, Array, decay, fit, magnitudes

RATES = np.array([5.0, 10.0, 40.0, 100.0, 300.0, 600.0, 1000.0, 1500.0])


@pytest.mark.parametrize("n", [1, 8])
@pytest.mark.parametrize("protocol", PROTOCOLS_MS)
def test_data_without_noise_return_the_truth(protocol: str, n: int) -> None:
    times = PROTOCOLS_MS[protocol]
    fitted = fit(decay(400.0, RATES, times), times, sigma=1e-6, n=n)
    # The images are float32: R2* is then known to about 1e-6.
    assert fitted.r2star_per_s == pytest.approx(RATES, rel=3e-6)
    assert fitted.s0 == pytest.approx(np.full(len(RATES), 400.0), rel=3e-6)
    assert (fitted.outcome == FitOutcome.CONVERGED).all()


def test_ragged_echo_spacing_returns_the_truth() -> None:
    times = np.array([0.07, 0.9, 1.0, 3.7, 4.1, 11.0, 30.0])
    fitted = fit(decay(50.0, RATES, times), times, sigma=1e-6)
    assert fitted.r2star_per_s == pytest.approx(RATES, rel=3e-6)


def test_two_echoes_give_the_logarithm_of_their_ratio() -> None:
    rng = np.random.default_rng(21)
    times = np.array([2.3, 4.6])
    signal = magnitudes(decay(1e5, np.geomspace(20, 800, 200), times), rng)
    expected = 1e3 * np.log(signal[:, 0].astype(float) / signal[:, 1]) / 2.3
    fitted = fit(signal, times)
    assert fitted.r2star_per_s == pytest.approx(expected, rel=1e-4)
    assert np.isnan(fitted.reduced_chi2).all()


def random_voxels(n_voxels: int, seed: int, n: int = 1) -> np.ndarray:
    rng = np.random.default_rng(seed)
    snr = np.exp(rng.uniform(np.log(10), np.log(200), n_voxels))
    rate = np.exp(rng.uniform(np.log(10), np.log(1500), n_voxels))
    return magnitudes(decay(snr, rate, TWELVE_MS), rng, n)


def log_likelihood(m: Array, amplitude: Array, n: int) -> Array:
    """Noncentral chi (methods sheet 1.2) by SciPy's Bessel function, sigma 1; sums over echoes."""
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        value = n * np.log(m) - (n - 1) * np.log(amplitude) - (m - amplitude) ** 2 / 2
        value = value + np.log(special.ive(n - 1, m * amplitude))
    return np.where(np.isfinite(value), value, -1e6).sum(axis=-1)


def measured(outcome: np.ndarray) -> np.ndarray:
    return np.flatnonzero(
        (outcome == FitOutcome.CONVERGED) | (outcome == FitOutcome.AT_LOWER_BOUND)
    )


@pytest.mark.parametrize("n", [1, 8])
def test_no_point_of_a_grid_is_likelier_than_the_fit(n: int) -> None:
    signal = random_voxels(40, seed=3, n=n)
    fitted = fit(signal, TWELVE_MS, n=n)
    rates = np.concatenate([[0.0], np.geomspace(1.0, 12e3, 60)])
    for v in measured(fitted.outcome):
        m = signal[v].astype(float)
        s0 = m.max() * np.exp(np.concatenate([np.linspace(-3, 1.5, 40), np.linspace(1.6, 12, 20)]))
        shape = np.exp(-1e-3 * rates[:, None] * TWELVE_MS)
        best = log_likelihood(m, s0[None, :, None] * shape[:, None, :], n).max()
        own = log_likelihood(m, decay(fitted.s0[v], fitted.r2star_per_s[v], TWELVE_MS), n)[0]
        assert own > best - 1e-5, (v, own - best)
    assert len(measured(fitted.outcome)) >= 32


def test_scipys_optimiser_finds_no_greater_rician_likelihood() -> None:
    signal = random_voxels(30, seed=4)
    fitted = fit(signal, TWELVE_MS)
    for v in measured(fitted.outcome):
        m = signal[v].astype(float)

        def cost(x: Array, m: Array = m) -> float:
            amplitude = np.exp(x[0] - 0.1 * max(x[1], 0.0) * TWELVE_MS)
            return min(-float(stats.rice.logpdf(m, amplitude).sum()), 1e9)

        started = [np.log(m[0]) + 0.1, 2.0]
        options = {"xatol": 1e-6, "fatol": 1e-8, "maxiter": 800}
        found = optimize.minimize(cost, started, method="Nelder-Mead", options=options)
        own = cost(np.array([np.log(fitted.s0[v]), 1e-2 * fitted.r2star_per_s[v]]))
        assert own < found.fun + 1e-5, v


def test_an_eight_echo_fit_is_not_trapped_by_a_slow_start() -> None:
    # A brute grid again, on decays that are over before the second echo: the hardest start.
    rng = np.random.default_rng(5)
    times = PROTOCOLS_MS["1.3+2.2k"]
    signal = magnitudes(decay(np.full(40, 60.0), np.full(40, 900.0), times), rng)
    fitted = fit(signal, times)
    rates = np.geomspace(1.0, 12e3 / 1.3, 70)
    for v in measured(fitted.outcome):
        m = signal[v].astype(float)
        s0 = m[0] * np.exp(np.linspace(-3, 12, 60))
        shape = np.exp(-1e-3 * rates[:, None] * times)
        best = log_likelihood(m, s0[None, :, None] * shape[:, None, :], 1).max()
        own = log_likelihood(m, decay(fitted.s0[v], fitted.r2star_per_s[v], times), 1)[0]
        assert own > best - 1e-5, (v, own - best)


@pytest.mark.parametrize(
    ("snr", "rate", "sd"),
    [
        # Methods sheet 4.2, Rician bound, 1.0 + 0.8k ms: where the estimate is near its limit.
        (50, 50, 2.750), (50, 200, 6.371), (100, 50, 1.375), (100, 200, 3.182), (100, 500, 12.74),
    ],
)  # fmt: skip
def test_scatter_is_the_cramer_rao_bound(snr: float, rate: float, sd: float) -> None:
    rng = np.random.default_rng(int(snr * rate))
    n_voxels = 6000
    fitted = fit(magnitudes(decay(np.full(n_voxels, snr), rate, TWELVE_MS), rng), TWELVE_MS)
    four_se = 4 * sd / np.sqrt(2 * n_voxels)
    assert fitted.r2star_per_s.std() == pytest.approx(sd, abs=four_se)
    assert np.median(fitted.r2star_se_per_s) == pytest.approx(sd, rel=0.01)
    assert fitted.r2star_per_s.mean() == pytest.approx(rate, abs=4 * sd / np.sqrt(n_voxels) + 0.1)


@pytest.mark.parametrize("n", [1, 4, 16])
def test_misfit_is_one_where_model_and_noise_are_right(n: int) -> None:
    # X² is chi-square with N - p degrees (methods sheet 5.3): mean 1, SD sqrt(2/10) here.
    rng = np.random.default_rng(8)
    n_voxels = 8000
    signal = magnitudes(decay(np.full(n_voxels, 60.0), 120.0, TWELVE_MS), rng, n)
    chi2 = fit(signal, TWELVE_MS, n=n).reduced_chi2
    assert chi2.mean() == pytest.approx(1.0, abs=4 * np.sqrt(0.2 / n_voxels) + 0.005)
    assert chi2.std() == pytest.approx(np.sqrt(0.2), rel=0.06)
    assert fit(signal, TWELVE_MS, sigma=0.5, n=n).reduced_chi2.mean() > 3.5


@pytest.mark.parametrize("factor", [2.0**-20, 2.0**20])
def test_r2star_is_the_same_to_the_bit_in_any_binary_unit(factor: float) -> None:
    # Multiplying by a power of two changes no digit.
    signal = random_voxels(300, seed=6)
    one, other = fit(signal, TWELVE_MS), fit(signal * factor, TWELVE_MS, sigma=factor)
    for name in ("r2star_per_s", "r2star_se_per_s", "reduced_chi2", "outcome"):
        np.testing.assert_array_equal(getattr(one, name), getattr(other, name))
    np.testing.assert_array_equal(one.s0 * np.float32(factor), other.s0)


@pytest.mark.parametrize("factor", [1e-6, 1e6])
def test_r2star_does_not_hang_on_the_scale_of_the_signal(factor: float) -> None:
    signal = random_voxels(300, seed=6)
    one, other = fit(signal, TWELVE_MS), fit(signal * factor, TWELVE_MS, sigma=factor)
    close = np.abs(one.r2star_per_s - other.r2star_per_s) < 2e-3 * one.r2star_se_per_s
    assert (close | (np.isnan(one.r2star_per_s) & np.isnan(other.r2star_per_s))).all()
    np.testing.assert_array_equal(one.outcome, other.outcome)
