"""The comparators against the methods sheet's tables: 2.3, and 2.4 with all its columns."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import special, stats

from liverfe.fit import r2star_bound_per_s
from tests.fit.decays import TWELVE_MS, decay, expected_mean, fit, magnitudes

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
    found = fit(signal, TWELVE_MS, model="log-linear").r2star_per_s.astype(float)
    assert found.mean() == pytest.approx(exact, abs=4 * found.std() / np.sqrt(20_000))


# Methods sheet 2.4, fits of the exact expected signal: n, SNR0, R and what each estimator reads;
# the constant of the offset fit stands behind its R.
COLUMNS = ("log-linear", "weighted-log-linear", "least-squares", "offset", "autoregressive")
DETERMINISTIC = """
1  20  300  262.1795 283.6782  285.4238  320.4964 0.6394  290.5767
1  20  500  259.1790 364.2004  427.3712  588.7119 1.0685  452.8417
1  50  500  379.2962 473.2686  485.8326  527.3545 0.7635  492.2924
1  50  800  305.6445 538.8773  751.1493  891.2726 1.0998  755.1397
1  100 800  408.6530 700.2317  785.0419  843.6851 0.9755  787.9599
1  100 1200 291.4020 633.4624 1156.3191 1314.9452 1.1505 1126.2509
8  50  300  241.4494 268.9301  272.3399  330.0267 2.5953  281.0245
8  50  500  228.4190 321.8378  386.0646  602.0471 3.5355  421.1419
8  100 500  321.5278 430.3491  463.0341  547.8688 3.0086  477.2255
"""


@pytest.mark.parametrize("row", DETERMINISTIC.strip().splitlines())
def test_plain_estimators_read_expected_signals_as_tabulated(row: str) -> None:
    count, snr, rate, *read = (float(word) for word in row.split())
    n = int(count)
    constant = read.pop(4)
    signal = expected_mean(decay(snr, rate, TWELVE_MS), n)
    for model, wanted in zip(COLUMNS, read, strict=True):
        fitted = fit(signal, TWELVE_MS, n=n, model=model)
        assert fitted.r2star_per_s[0] == pytest.approx(wanted, abs=1e-3), model
        if model == "offset":  # the least-squares constant is what the decay leaves on average
            left = signal - decay(fitted.s0[0], fitted.r2star_per_s[0], TWELVE_MS)
            assert left.mean() == pytest.approx(constant, abs=1e-4)


# Methods sheet 2.4: E[M] for SNR0 = 50, R = 500; the first-moment fit must return both.
MEANS = {
    1: "30.343025 20.353094 13.663332 9.189083 6.205052 4.228090 2.940938 2.142892 1.691587 "
       "1.459725 1.348166 1.296379",
    8: "30.572972 20.694560 14.167628 9.925258 7.255074 5.664755 4.786826 4.338318 4.122237 "
       "4.021733 3.975832 3.955053",
}  # fmt: skip


@pytest.mark.parametrize("model", ["first-moment", "weighted-first-moment"])
@pytest.mark.parametrize("n", MEANS)
def test_the_first_moment_undoes_the_expectation(n: int, model: str) -> None:
    signal = np.array(MEANS[n].split(), dtype=float)
    assert signal == pytest.approx(expected_mean(decay(50, 500, TWELVE_MS), n)[0], abs=6e-7)
    fitted = fit(signal, TWELVE_MS, n=n, model=model)
    assert fitted.r2star_per_s[0] == pytest.approx(500.0, abs=1e-3)
    assert fitted.s0[0] == pytest.approx(50.0, abs=1e-4)


# Methods sheet 2.4, 20 000 trials: SNR0, R, Cramér-Rao bound; mean / median / SD of each estimator.
TRIALS = 20_000
MODELS = (
    "log-linear", "weighted-log-linear", "autoregressive", "least-squares", "offset", "truncation",
    "second-moment", "first-moment", "rician-ml",
)  # fmt: skip
SIMULATED = """
20 30 6.16 30.1/30.1/6.2 29.7/-/6.1 30.6/-/7.3 30.0/-/6.1 107/39.8/165 30.0/-/6.1 30.1/-/6.2 \
30.1/30.1/6.1 30.1/-/6.1
20 300 27.9 281/276/44 262/261/25 293/292/32 286/286/26 332/322/57 285/284/31 305/300/45 \
301/300/29 301/300/28
20 500 69.6 282/279/49 322/320/47 457/452/64 433/428/61 597/587/111 465/458/82 515/500/109 \
506/499/74 506/500/73
20 800 186 198/194/52 273/269/56 584/575/117 577/555/171 1070/1019/321 765/751/211 858/812/280 \
835/801/224 832/803/217
50 300 10.8 300/297/24 293/292/11 299/299/13 298/298/11 310/307/20 297/297/11 301/300/17 \
300/300/11 300/300/11
50 800 67.8 328/324/49 494/492/65 756/753/64 755/751/67 897/892/87 777/773/71 809/802/95 \
804/800/69 804/800/69
50 1200 184 221/218/53 383/378/66 959/952/133 1076/1061/182 1456/1426/260 1175/1165/186 \
1241/1219/236 1226/1206/202 1224/1205/199
100 800 33.0 434/429/48 667/669/49 788/787/34 786/785/33 845/843/40 792/791/34 802/800/47 \
801/800/33 801/800/33
"""


@pytest.mark.parametrize("row", SIMULATED.strip().splitlines(), ids=lambda row: row[:8])
def test_scatter_and_bias_are_as_simulated(row: str) -> None:
    snr, rate, bound, *cells = row.split()
    assert r2star_bound_per_s(TWELVE_MS, float(rate), float(snr), 1.0) == pytest.approx(
        float(bound), abs=_rounding(bound)
    )
    n_voxels = 5000
    rng = np.random.default_rng(int(snr) * int(rate))
    signal = magnitudes(decay(np.full(n_voxels, float(snr)), float(rate), TWELVE_MS), rng)
    for model, cell in zip(MODELS, cells, strict=True):
        found = fit(signal, TWELVE_MS, model=model).r2star_per_s.astype(float)
        resolved = found[np.isfinite(found)]
        assert len(resolved) > 0.998 * n_voxels
        mean, median, sd = cell.split("/")
        # Four standard errors of both simulations, and the rounding of the table. Tails are long,
        # so the SE of the SD takes the kurtosis.
        se = float(sd) * np.hypot(n_voxels**-0.5, TRIALS**-0.5)
        se_of_sd = se * np.sqrt((stats.kurtosis(resolved, fisher=False) - 1) / 4)
        assert resolved.mean() == pytest.approx(float(mean), abs=4 * se + _rounding(mean)), model
        assert resolved.std() == pytest.approx(float(sd), abs=4 * se_of_sd + _rounding(sd)), model
        if median != "-":
            tolerance = 4 * 1.2533 * se + _rounding(median)
            assert np.median(resolved) == pytest.approx(float(median), abs=tolerance), model


def _rounding(number: str) -> float:
    return 0.5 * 10.0 ** -len(number.partition(".")[2])


def test_the_fitted_signal_chooses_echoes_with_less_bias_than_the_noisy_one() -> None:
    # Methods sheet 2.1: selection by noisy M is biased, by predicted S better.
    rng = np.random.default_rng(17)
    for snr, rate in ((20.0, 300.0), (20.0, 500.0), (50.0, 800.0)):
        signal = magnitudes(decay(np.full(5000, snr), rate, TWELVE_MS), rng)
        noisy, predicted = (
            fit(signal, TWELVE_MS, model=model).r2star_per_s.astype(float).mean() - rate
            for model in ("truncation", "predicted-truncation")
        )
        assert noisy < 0
        assert abs(predicted) < 0.7 * abs(noisy)


def test_weights_of_one_over_variance_bring_the_first_moment_to_maximum_likelihood() -> None:
    # Methods sheet 4.1: weighted by 1 / xi, the first moment uses 99 % and more of the information
    # from an amplitude of one sigma on. The same noise in each fit, so ratios are sharp.
    rng = np.random.default_rng(18)
    signal = magnitudes(decay(np.full(8000, 20.0), 500.0, TWELVE_MS), rng)
    likelihood, weighted, plain = (
        fit(signal, TWELVE_MS, model=model).r2star_per_s.astype(float).std()
        for model in ("rician-ml", "weighted-first-moment", "first-moment")
    )
    assert weighted == pytest.approx(likelihood, rel=0.005)
    assert plain > 1.008 * likelihood


@pytest.mark.parametrize("n", [1, 8, 64])
@pytest.mark.parametrize("rate", [30.0, 300.0, 800.0])
def test_second_moment_undoes_the_second_moment(n: int, rate: float) -> None:
    # E[M²] = A² + 2n (methods sheet 1.2), exact.
    signal = np.sqrt(decay(50, rate, TWELVE_MS) ** 2 + 2 * n)
    fitted = fit(signal, TWELVE_MS, n=n, model="second-moment")
    assert fitted.r2star_per_s[0] == pytest.approx(rate, rel=2e-5, abs=2e-3)
    assert fitted.s0[0] == pytest.approx(50.0, rel=1e-5)


@pytest.mark.parametrize("model", ["truncation", "predicted-truncation"])
def test_truncation_drops_what_least_squares_is_pulled_by(model: str) -> None:
    # Two echoes of pure floor at the end, above neither 2.5 sigma: as if they had not been there.
    times = np.array([1.0, 2.0, 3.0, 4.0, 5.0, 6.0])
    signal = decay(200, 900, times)[0]
    signal[-2:] = 2.4
    assert signal[-3] > 2.5
    fitted = fit(signal, times, model=model)
    assert fitted.r2star_per_s[0] == pytest.approx(900.0, abs=0.01)
    # Three echoes are kept even where fewer stand out.
    signal = np.array([50.0, 5.0, 0.5, 2.0, 2.0, 2.0])
    fitted = fit(signal, times, model=model)
    assert fitted.r2star_per_s[0] == pytest.approx(1e3 * np.log(10), rel=1e-4)


def test_offset_finds_rate_and_constant() -> None:
    signal = decay(100, 250, TWELVE_MS)[0] + 20.0
    fitted = fit(signal, TWELVE_MS, model="offset")
    assert fitted.r2star_per_s[0] == pytest.approx(250.0, abs=2e-3)
    assert fitted.s0[0] == pytest.approx(100.0, rel=1e-4)
