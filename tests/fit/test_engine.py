"""Maximum likelihood of any signal model, against SciPy's densities and optimiser, and truth."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import optimize, stats

from liverfe.fit import (
    FitOutcome,
    fat_water_decay,
    fit_decays,
    mono_exponential,
    profile_r2star,
    shaped_decay,
)
from tests.fit.decays import PROTOCOLS_MS, SIGMA_ONE, TWELVE_MS, Array, decay, magnitudes

# Liver fat in six peaks (methods sheet 3.1, H6), 1.5 T: shift from water in ppm, share.
FAT_HZ = (np.array([0.90, 1.30, 2.10, 2.75, 4.20, 5.30]) - 4.70) * 1.5 * 42.577478518
FAT_SHARE = np.array([0.088, 0.700, 0.120, 0.006, 0.039, 0.047])


def phasor(times_ms: Array) -> np.ndarray:
    return (FAT_SHARE * np.exp(2j * np.pi * 1e-3 * times_ms[:, None] * FAT_HZ)).sum(axis=1)


def exact_log_likelihood(m: Array, amplitude: Array, sigma: float, n: int) -> float:
    """SciPy's density: M² / sigma² is noncentral chi-square with 2n degrees of freedom."""
    density = stats.ncx2.logpdf((m / sigma) ** 2, 2 * n, (amplitude / sigma) ** 2)
    return float((density + np.log(2 * m / sigma**2)).sum())


@pytest.mark.parametrize("n", [1, 8])
def test_the_optimum_is_that_of_scipys_minimize(n: int) -> None:
    # 10,000 voxels of it by ``scripts/bench --full``; asked: 1e-3 of a standard error.
    rng = np.random.default_rng(n)
    signal = magnitudes(
        decay(rng.uniform(15, 120, 40), rng.uniform(20, 900, 40), TWELVE_MS), rng, n
    )
    fitted = fit_decays(signal, mono_exponential(TWELVE_MS), SIGMA_ONE, n)
    resolved = np.flatnonzero(fitted.standard_errors[:, 1] < 0.5 * fitted.parameters[:, 1])
    assert len(resolved) > 30
    for v in resolved:
        m = signal[v].astype(float)

        def cost(x: Array, m: Array = m) -> float:
            return -exact_log_likelihood(m, np.exp(x[0] - 0.1 * x[1] * TWELVE_MS), 1.0, n)

        start = [fitted.parameters[v, 0] + 0.05, 1.1e-2 * fitted.parameters[v, 1]]
        options = {"xatol": 1e-8, "fatol": 1e-11, "maxiter": 2000}
        found = optimize.minimize(cost, start, method="Nelder-Mead", options=options)
        apart = 100 * found.x[1] - fitted.parameters[v, 1]
        assert abs(apart) < 1e-3 * fitted.standard_errors[v, 1], v
        assert fitted.log_likelihood[v] == pytest.approx(-found.fun, abs=1e-6)


@pytest.mark.parametrize("sigma", [0.5, 3.0])
@pytest.mark.parametrize("n", [1, 4, 16])
def test_the_likelihood_has_all_its_terms(n: int, sigma: float) -> None:
    # So that sigma, n and signal models can be compared.
    rng = np.random.default_rng(5)
    signal = sigma * magnitudes(decay(np.full(20, 40.0), 150.0, TWELVE_MS), rng, n)
    fitted = fit_decays(signal, mono_exponential(TWELVE_MS), np.array([sigma]), n)
    for v in range(20):
        s0, rate = np.exp(fitted.parameters[v, 0]), fitted.parameters[v, 1]
        exact = exact_log_likelihood(
            signal[v].astype(float), decay(s0, rate, TWELVE_MS)[0], sigma, n
        )
        assert fitted.log_likelihood[v] == pytest.approx(exact, abs=2e-5)


def test_a_second_channel_number_fits_less_well() -> None:
    rng = np.random.default_rng(6)
    signal = magnitudes(decay(np.full(500, 30.0), 400.0, TWELVE_MS), rng, 4)
    total = {
        n: fit_decays(signal, mono_exponential(TWELVE_MS), SIGMA_ONE, n).log_likelihood.sum()
        for n in (2, 3, 4, 5, 6)
    }
    assert max(total, key=lambda n: total[n]) == 4


def test_information_determinant_and_errors_are_those_of_the_closed_form() -> None:
    # At high signal J = 1 (methods sheet 4.1): F = sum of a² (1, -t)(1, -t)'.
    signal = magnitudes(decay(np.full(50, 400.0), 50.0, TWELVE_MS), np.random.default_rng(7))
    fitted = fit_decays(signal, mono_exponential(TWELVE_MS), SIGMA_ONE, 1)
    for v in range(50):
        a = decay(np.exp(fitted.parameters[v, 0]), fitted.parameters[v, 1], TWELVE_MS)[0]
        design = np.stack([np.ones(12), -TWELVE_MS])
        information = (a**2 * design) @ design.T
        assert fitted.log_det_information[v] == pytest.approx(
            np.log(np.linalg.det(information)), abs=1e-3
        )
        sd = np.sqrt(np.diag(np.linalg.inv(information))) * [1.0, 1e3]
        assert fitted.standard_errors[v] == pytest.approx(sd, rel=1e-3)


def test_echoes_that_do_not_count_are_as_if_they_were_not_there() -> None:
    rng = np.random.default_rng(8)
    times = PROTOCOLS_MS["1.2k"]
    signal = magnitudes(decay(np.full(30, 60.0), 120.0, times), rng)
    usable = np.ones((30, 8), dtype=bool)
    usable[:, [2, 5]] = False
    spoilt = signal.copy()
    spoilt[:, 2], spoilt[:, 5] = 9e4, np.nan
    ragged = fit_decays(spoilt, mono_exponential(times), SIGMA_ONE, 1, usable=usable)
    kept = np.flatnonzero(usable[0])
    short = fit_decays(
        np.ascontiguousarray(signal[:, kept]), mono_exponential(times[kept]), SIGMA_ONE, 1
    )
    assert ragged.parameters == pytest.approx(short.parameters, rel=1e-9)
    assert ragged.reduced_chi2 == pytest.approx(short.reduced_chi2, rel=1e-6)
    assert ragged.log_likelihood == pytest.approx(short.log_likelihood, rel=1e-9)


def test_each_voxel_may_drop_another_echo() -> None:
    rng = np.random.default_rng(9)
    signal = magnitudes(decay(np.full(12, 60.0), 120.0, TWELVE_MS), rng)
    spoilt, usable = signal.copy(), ~np.eye(12, dtype=bool)
    spoilt[np.eye(12, dtype=bool)] *= 1.5
    ragged = fit_decays(spoilt, mono_exponential(TWELVE_MS), SIGMA_ONE, 1, usable=usable)
    for v in range(12):
        kept = np.flatnonzero(usable[v])
        alone = fit_decays(signal[v : v + 1, kept], mono_exponential(TWELVE_MS[kept]), SIGMA_ONE, 1)
        assert ragged.parameters[v] == pytest.approx(alone.parameters[0], rel=1e-8)


def test_fewer_usable_echoes_than_parameters_are_not_fitted() -> None:
    signal = decay(50.0, 100.0, TWELVE_MS).astype(np.float32)
    usable = np.zeros((1, 12), dtype=bool)
    usable[0, 3] = True
    fitted = fit_decays(signal, mono_exponential(TWELVE_MS), SIGMA_ONE, 1, usable=usable)
    assert fitted.outcome[0] == FitOutcome.NOT_FITTED
    assert np.isnan(fitted.parameters).all()


@pytest.mark.parametrize("fat", [0.0, 0.1, 0.3, 0.8])
def test_fat_and_water_are_found_in_a_magnitude(fat: float) -> None:
    # Truth of a phantom; standard errors are those of the scatter.
    rng = np.random.default_rng(10)
    c = phasor(TWELVE_MS)
    amplitude = decay(np.full(600, 150.0), 60.0, TWELVE_MS) * np.abs(1 - fat + fat * c)
    fitted = fit_decays(magnitudes(amplitude, rng), fat_water_decay(TWELVE_MS, c), SIGMA_ONE, 1)
    known = fitted.outcome == FitOutcome.CONVERGED
    assert known.mean() > 0.99
    s0, rate, share = fitted.parameters[known].T
    se = np.median(fitted.standard_errors[known], axis=0)
    assert np.median(rate) == pytest.approx(60.0, abs=0.2 * se[1] + 0.05)
    assert np.median(share) == pytest.approx(fat, abs=0.2 * se[2] + 0.002)
    if fat > 0:
        assert rate.std() == pytest.approx(se[1], rel=0.12)
        assert np.exp(np.median(s0)) == pytest.approx(150.0, rel=0.01)


def test_without_its_fat_the_model_is_one_exponential() -> None:
    rng = np.random.default_rng(11)
    signal = magnitudes(decay(np.full(100, 80.0), 100.0, TWELVE_MS), rng)
    plain = fit_decays(signal, mono_exponential(TWELVE_MS), SIGMA_ONE, 1)
    richer = fit_decays(signal, fat_water_decay(TWELVE_MS, phasor(TWELVE_MS)), SIGMA_ONE, 1)
    assert (richer.log_likelihood >= plain.log_likelihood - 1e-6).all()


@pytest.mark.parametrize(
    ("shape", "bend"),
    [((-1.0) ** np.arange(12), 0.05), (-((TWELVE_MS / 10.0) ** 2), 0.8)],
    ids=["alternating", "concave"],
)
def test_a_bent_decay_gives_rate_and_bend(shape: Array, bend: float) -> None:
    rng = np.random.default_rng(12)
    amplitude = decay(np.full(800, 100.0), 70.0, TWELVE_MS) * np.exp(bend * shape)
    fitted = fit_decays(magnitudes(amplitude, rng), shaped_decay(TWELVE_MS, shape), SIGMA_ONE, 1)
    se = np.median(fitted.standard_errors, axis=0)
    rate, found = np.median(fitted.parameters[:, 1]), np.median(fitted.parameters[:, 2])
    # Four standard errors of a median of 800.
    assert rate == pytest.approx(70.0, abs=4 * 1.2533 * se[1] / np.sqrt(800))
    assert found == pytest.approx(bend, abs=4 * 1.2533 * se[2] / np.sqrt(800))
    assert fitted.parameters[:, 2].std() == pytest.approx(se[2], rel=0.1)


def test_twice_the_gain_of_a_needless_freedom_is_chi_square_of_one() -> None:
    # Wilks: twice the gain in log-likelihood has mean 1, and 95 % below 3.84, for nothing.
    rng = np.random.default_rng(13)
    signal = magnitudes(decay(np.full(4000, 60.0), 100.0, TWELVE_MS), rng)
    plain = fit_decays(signal, mono_exponential(TWELVE_MS), SIGMA_ONE, 1)
    shape = (-1.0) ** np.arange(12)
    richer = fit_decays(signal, shaped_decay(TWELVE_MS, shape), SIGMA_ONE, 1)
    gain = 2 * (richer.log_likelihood - plain.log_likelihood)
    assert gain.mean() == pytest.approx(1.0, abs=4 * np.sqrt(2 / 4000))
    assert (gain < 3.841).mean() == pytest.approx(0.95, abs=4 * np.sqrt(0.05 * 0.95 / 4000))


def test_the_profile_peaks_where_the_fit_ends() -> None:
    rng = np.random.default_rng(14)
    signal = magnitudes(decay(np.full(60, 40.0), 250.0, TWELVE_MS), rng)
    fitted = fit_decays(signal, mono_exponential(TWELVE_MS), SIGMA_ONE, 1)
    rates = np.sort(np.concatenate([np.linspace(100, 500, 81), fitted.parameters[:, 1]]))
    profile = profile_r2star(signal, TWELVE_MS, rates, SIGMA_ONE, 1)
    assert profile.max(axis=1) == pytest.approx(fitted.log_likelihood, abs=1e-6)
    assert rates[profile.argmax(axis=1)] == pytest.approx(fitted.parameters[:, 1], abs=0.05)


def test_the_profile_is_scipys_likelihood_with_the_best_s0() -> None:
    rng = np.random.default_rng(15)
    for n in (1, 8):
        signal = magnitudes(decay(np.full(3, 25.0), 500.0, TWELVE_MS), rng, n)
        rates = np.array([100.0, 400.0, 1500.0])
        profile = profile_r2star(signal, TWELVE_MS, rates, SIGMA_ONE, n)
        for v in range(3):
            for k, rate in enumerate(rates):
                m = signal[v].astype(float)
                shape = decay(1.0, rate, TWELVE_MS)[0]

                def cost(x: float, m: Array = m, shape: Array = shape, n: int = n) -> float:
                    return -exact_log_likelihood(m, np.exp(x) * shape, 1.0, n)

                best = optimize.minimize_scalar(cost, bounds=(-3, 8), method="bounded")
                assert profile[v, k] == pytest.approx(-best.fun, abs=1e-5), (n, v, k)
