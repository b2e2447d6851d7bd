"""The plain estimators, against the methods sheet's tables, lmfit and closed forms."""

from __future__ import annotations

import lmfit
import numpy as np
import pytest
from scipy import optimize, special, stats

from liverfe.fit import FitOutcome
from tests.fit.decays import SIGMA_ONE, TWELVE_MS, Array, decay, fit, magnitudes


def expected_mean(a: Array, n: int) -> Array:
    """E[m] (Gudbjartsson 1995, Constantinides 1997) in closed form, without the package."""
    if n == 1:
        u = a**2 / 4
        return np.sqrt(np.pi / 2) * ((1 + 2 * u) * special.i0e(u) + 2 * u * special.i1e(u))
    beta = np.sqrt(2) * special.gamma(n + 0.5) / special.gamma(n)
    small = np.minimum(a, 20.0)
    closed = beta * special.hyp1f1(-0.5, n, -(small**2) / 2)
    # 1F1 ends in overflow; its asymptotic series (A&S 13.5.1) has converged long before.
    k = np.arange(8)
    terms = special.poch(-0.5, k) * special.poch(0.5 - n, k) / special.factorial(k)
    large = np.maximum(a, 20.0)
    series = large * (terms * (2 / large[..., None] ** 2) ** k).sum(axis=-1)
    return np.where(a < 20.0, closed, series)


# Methods sheet 2.3: exact expectation of log-linear fits under Rician noise.
LOG_LINEAR = {
    20: (100.000, 281.051, 282.084, 197.409, 120.641),
    50: (100.000, 299.820, 403.266, 328.196, 221.041),
    100: (100.000, 300.000, 466.187, 433.568, 311.271),
}


@pytest.mark.parametrize("snr", LOG_LINEAR)
@pytest.mark.parametrize("column", range(5))
def test_log_linear_mean_is_its_exact_expectation(snr: int, column: int) -> None:
    rate = (100, 300, 500, 800, 1200)[column]
    centred = TWELVE_MS - TWELVE_MS.mean()
    weight = centred / (centred**2).sum()
    a = snr * np.exp(-1e-3 * rate * TWELVE_MS)
    exact = rate - 0.5e3 * (weight * special.exp1(a**2 / 2)).sum()
    assert exact == pytest.approx(LOG_LINEAR[snr][column], abs=6e-4)
    rng = np.random.default_rng(snr + rate)
    signal = magnitudes(decay(np.full(20_000, snr), rate, TWELVE_MS), rng)
    found = fit(signal, TWELVE_MS, estimator="log-linear").r2star_per_s.astype(float)
    assert found.mean() == pytest.approx(exact, abs=4 * found.std() / np.sqrt(20_000))


# Methods sheet 2.4: fits of the exact expected signal; n, SNR0, R and what each estimator reads.
# Its column of weighted log-linear fits is another estimator than ours: it weights by the fitted S,
# again and again, ours by the measured M.
PLAIN = ("log-linear", "least-squares", "offset")
DETERMINISTIC = [
    (1, 20, 300, 262.1795, 285.4238, 320.4964),
    (1, 20, 500, 259.1790, 427.3712, 588.7119),
    (1, 50, 500, 379.2962, 485.8326, 527.3545),
    (1, 50, 800, 305.6445, 751.1493, 891.2726),
    (1, 100, 800, 408.6530, 785.0419, 843.6851),
    (1, 100, 1200, 291.4020, 1156.3191, 1314.9452),
    (8, 50, 300, 241.4494, 272.3399, 330.0267),
    (8, 50, 500, 228.4190, 386.0646, 602.0471),
    (8, 100, 500, 321.5278, 463.0341, 547.8688),
]


@pytest.mark.parametrize("case", DETERMINISTIC, ids=lambda case: "-".join(map(str, case[:3])))
@pytest.mark.parametrize("column", range(3), ids=PLAIN)
def test_plain_estimators_read_expected_signals_as_tabulated(
    case: tuple[float, ...], column: int
) -> None:
    n, snr, rate = int(case[0]), case[1], case[2]
    signal = expected_mean(decay(snr, rate, TWELVE_MS), n)
    found = fit(signal, TWELVE_MS, n=n, estimator=PLAIN[column]).r2star_per_s[0]
    assert found == pytest.approx(case[3 + column], abs=1e-3)


# Methods sheet 2.4: E[M] for SNR0 = 50, R = 500.
MEANS = {
    1: "30.343025 20.353094 13.663332 9.189083 6.205052 4.228090 2.940938 2.142892 1.691587 "
       "1.459725 1.348166 1.296379",
    8: "30.572972 20.694560 14.167628 9.925258 7.255074 5.664755 4.786826 4.338318 4.122237 "
       "4.021733 3.975832 3.955053",
}  # fmt: skip


@pytest.mark.parametrize("n", MEANS)
def test_first_moment_undoes_the_expectation(n: int) -> None:
    signal = np.array(MEANS[n].split(), dtype=float)
    assert signal == pytest.approx(expected_mean(decay(50, 500, TWELVE_MS), n)[0], abs=6e-7)
    fitted = fit(signal, TWELVE_MS, n=n, estimator="first-moment")
    assert fitted.r2star_per_s[0] == pytest.approx(500.0, abs=1e-3)
    assert fitted.s0[0] == pytest.approx(50.0, abs=1e-4)


@pytest.mark.parametrize("n", [1, 8])
@pytest.mark.parametrize("rate", [30.0, 300.0, 800.0])
def test_second_moment_undoes_the_second_moment(n: int, rate: float) -> None:
    # E[M²] = A² + 2n (methods sheet 1.2), exact.
    signal = np.sqrt(decay(50, rate, TWELVE_MS) ** 2 + 2 * n)
    fitted = fit(signal, TWELVE_MS, n=n, estimator="second-moment")
    assert fitted.r2star_per_s[0] == pytest.approx(rate, abs=2e-3)
    assert fitted.s0[0] == pytest.approx(50.0, rel=1e-5)


def test_truncation_drops_what_least_squares_is_pulled_by() -> None:
    # Two echoes of pure floor at the end, above neither 2.5 sigma: as if they had not been there.
    times = np.array([1.0, 2.0, 3.0, 4.0, 5.0, 6.0])
    signal = decay(200, 900, times)[0]
    signal[-2:] = 2.4
    assert signal[-3] > 2.5
    fitted = fit(signal, times, estimator="truncation")
    assert fitted.r2star_per_s[0] == pytest.approx(900.0, abs=0.01)
    # Three echoes are kept even where fewer stand out.
    signal = np.array([50.0, 5.0, 0.5, 2.0, 2.0, 2.0])
    fitted = fit(signal, times, estimator="truncation")
    assert fitted.r2star_per_s[0] == pytest.approx(1e3 * np.log(10), rel=1e-4)


def test_offset_finds_rate_and_constant() -> None:
    signal = decay(100, 250, TWELVE_MS)[0] + 20.0
    fitted = fit(signal, TWELVE_MS, estimator="offset")
    assert fitted.r2star_per_s[0] == pytest.approx(250.0, abs=2e-3)
    assert fitted.s0[0] == pytest.approx(100.0, rel=1e-4)


# Methods sheet 2.4, 20 000 trials: mean, median, SD for each SNR0 and R.
SIMULATED = {
    (20, 300): {"least-squares": (286, 286, 26), "truncation": (285, 284, 31),
                "offset": (332, 322, 57), "second-moment": (305, 300, 45),
                "first-moment": (301, 300, 29), "rician-ml": (301, 300, 28)},
    (20, 800): {"least-squares": (577, 555, 171), "truncation": (765, 751, 211),
                "offset": (1070, 1019, 321), "second-moment": (858, 812, 280),
                "first-moment": (835, 801, 224), "rician-ml": (832, 803, 217)},
    (50, 800): {"log-linear": (328, 324, 49), "weighted-log-linear": (494, 492, 65),
                "least-squares": (755, 751, 67), "truncation": (777, 773, 71),
                "offset": (897, 892, 87), "second-moment": (809, 802, 95),
                "first-moment": (804, 800, 69), "rician-ml": (804, 800, 69)},
    (50, 1200): {"least-squares": (1076, 1061, 182), "truncation": (1175, 1165, 186),
                 "offset": (1456, 1426, 260), "second-moment": (1241, 1219, 236),
                 "first-moment": (1226, 1206, 202), "rician-ml": (1224, 1205, 199)},
    (100, 800): {"log-linear": (434, 429, 48), "weighted-log-linear": (667, 669, 49),
                 "least-squares": (786, 785, 33), "offset": (845, 843, 40),
                 "first-moment": (801, 800, 33), "rician-ml": (801, 800, 33)},
}  # fmt: skip


@pytest.mark.parametrize("case", SIMULATED, ids=str)
def test_scatter_and_bias_are_as_simulated(case: tuple[int, int]) -> None:
    snr, rate = case
    n_voxels = 5000
    rng = np.random.default_rng(snr * rate)
    signal = magnitudes(decay(np.full(n_voxels, snr), rate, TWELVE_MS), rng)
    for estimator, (mean, median, sd) in SIMULATED[case].items():
        found = fit(signal, TWELVE_MS, estimator=estimator).r2star_per_s.astype(float)
        resolved = found[np.isfinite(found)]
        assert len(resolved) > 0.998 * n_voxels
        # Four standard errors of both simulations, and the rounding of the table. Tails are long,
        # so the SE of the SD takes the kurtosis.
        se = np.hypot(sd / np.sqrt(n_voxels), sd / np.sqrt(20_000))
        se_of_sd = se * np.sqrt((stats.kurtosis(resolved, fisher=False) - 1) / 4)
        assert resolved.mean() == pytest.approx(mean, abs=4 * se + 0.5), estimator
        assert np.median(resolved) == pytest.approx(median, abs=4 * 1.2533 * se + 0.5), estimator
        assert resolved.std() == pytest.approx(sd, abs=4 * se_of_sd + 0.5), estimator


@pytest.mark.parametrize("estimator", ["least-squares", "first-moment"])
@pytest.mark.parametrize("n", [1, 8])
def test_lmfit_finds_the_same_minimum(estimator: str, n: int) -> None:
    rng = np.random.default_rng(12)
    rates = np.exp(rng.uniform(np.log(20), np.log(700), 15))
    signal = magnitudes(decay(rng.uniform(30, 150, 15), rates, TWELVE_MS), rng, n)
    fitted = fit(signal, TWELVE_MS, n=n, estimator=estimator)
    for v, m in enumerate(signal.astype(float)):

        def residual(parameters: lmfit.Parameters, m: Array = m) -> Array:
            a = decay(parameters["s0"].value, parameters["rate"].value, TWELVE_MS)[0]
            return m - (expected_mean(a, n) if estimator == "first-moment" else a)

        parameters = lmfit.create_params(s0=m[0] * 1.2, rate={"value": rates[v], "min": 0.0})
        result = lmfit.minimize(residual, parameters, xtol=1e-12, ftol=1e-12)
        assert fitted.r2star_per_s[v] == pytest.approx(result.params["rate"].value, rel=2e-5), v
        assert fitted.s0[v] == pytest.approx(result.params["s0"].value, rel=2e-5), v


def test_least_squares_cannot_be_trapped() -> None:
    # Against a fine grid with S0 projected out (methods sheet 2.1), on noise-like voxels too.
    rng = np.random.default_rng(13)
    signal = magnitudes(decay(rng.uniform(1, 20, 60), rng.uniform(10, 3000, 60), TWELVE_MS), rng)
    fitted = fit(signal, TWELVE_MS, estimator="least-squares")
    rates = np.concatenate([[0.0], np.geomspace(0.5, 11_900, 4000)])
    shape = decay(np.ones(len(rates)), rates, TWELVE_MS)
    for v in np.flatnonzero(np.isfinite(fitted.r2star_per_s)):
        m = signal[v].astype(float)
        best = ((m**2).sum() - (shape @ m) ** 2 / (shape**2).sum(axis=1)).min()
        own = ((m - decay(fitted.s0[v], fitted.r2star_per_s[v], TWELVE_MS)[0]) ** 2).sum()
        assert own <= best * (1 + 1e-6), v


def test_the_offset_fit_cannot_be_trapped() -> None:
    # A fine grid of rates with S0 and a constant of at least zero solved for at each.
    rng = np.random.default_rng(16)
    signal = magnitudes(decay(rng.uniform(3, 60, 40), rng.uniform(20, 2500, 40), TWELVE_MS), rng)
    fitted = fit(signal, TWELVE_MS, estimator="offset")
    for v in np.flatnonzero(np.isfinite(fitted.r2star_per_s)):
        m = signal[v].astype(float)

        def cost(rate: float, m: Array = m) -> float:
            shape = np.exp(-1e-3 * rate * TWELVE_MS)
            return optimize.nnls(np.column_stack([shape, np.ones(12)]), m)[1] ** 2

        best = min(cost(rate) for rate in np.geomspace(5.0, 11_900, 250))
        assert cost(float(fitted.r2star_per_s[v])) <= best * (1 + 1e-6), v


def test_log_linear_is_numpys_straight_line() -> None:
    rng = np.random.default_rng(14)
    signal = magnitudes(decay(np.full(20, 60), 120, TWELVE_MS), rng)
    plain = fit(signal, TWELVE_MS, estimator="log-linear")
    weighted = fit(signal, TWELVE_MS, estimator="weighted-log-linear")
    for v, m in enumerate(signal.astype(float)):
        line = np.polyfit(TWELVE_MS, np.log(m), 1)
        assert plain.r2star_per_s[v] == pytest.approx(-1e3 * line[0], rel=1e-5)
        assert plain.s0[v] == pytest.approx(np.exp(line[1]), rel=1e-5)
        line = np.polyfit(TWELVE_MS, np.log(m), 1, w=m)  # polyfit squares its weights
        assert weighted.r2star_per_s[v] == pytest.approx(-1e3 * line[0], rel=1e-5)


def test_comparison_fits_carry_misfit_and_bound_of_their_own_result() -> None:
    rng = np.random.default_rng(15)
    signal = magnitudes(decay(np.full(4000, 80), 100, TWELVE_MS), rng)
    house = fit(signal, TWELVE_MS)
    other = fit(signal, TWELVE_MS, estimator="first-moment")
    # Same model, nearly the same fit: the same misfit and bound as the house's, to a percent.
    assert other.reduced_chi2.mean() == pytest.approx(house.reduced_chi2.mean(), rel=0.01)
    assert np.median(other.r2star_se_per_s) == pytest.approx(
        np.median(house.r2star_se_per_s), rel=0.01
    )


def test_a_bound_too_large_to_store_is_infinite_and_silent() -> None:
    # Warnings are errors here: a huge standard error once overflowed with one.
    signal = np.array([[3.0, 0.001, 0.001, 0.001]])
    fitted = fit(signal, [1.0, 1.8, 2.6, 3.4], sigma=SIGMA_ONE * 1e3, estimator="least-squares")
    assert not np.isfinite(fitted.r2star_se_per_s[0])
    assert fitted.outcome[0] in set(FitOutcome)
