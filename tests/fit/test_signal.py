"""The signal equations, against published constants, SciPy's distributions and closed forms."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate, special, stats

from liverfe.fit import amplitude, expected_magnitude, magnitude_variance, noise_floor, signal

# Methods sheet 1.3: n, mean/sigma (published by Constantinides 1997), var/sigma² (of Koay 2006).
BACKGROUND = [
    (1, 1.2533141, 0.42920367320510366), (2, 1.8799712, 0.465708264711),
    (3, 2.3499640, 0.477669163612), (4, 2.7416247, 0.4834941393603609),
    (6, 3.3927605, 0.4891759468548269), (8, 3.9380256, 0.49195420135894175),
    (12, 4.8482279, 0.4946862482541263), (16, 5.6128394, 0.4960339908122364),
    (20, 6.2851542, 0.4968365823718557), (24, 6.8922152, 0.49736907650825657),
    (32, 7.9688122, 0.49803177052530145), (64, 11.291633, 0.49901964176235936),
]  # fmt: skip

# Methods sheet 1.3: a, E[M], SD. Its column of variances is left out: at a = 5 it disagrees with
# its own SD² in the fifth digit.
RICIAN = [
    (0.25, 1.27282107097, 0.6651515025), (0.5, 1.33044734061, 0.6927552770),
    (1, 1.54857246055, 0.7758371829), (1.5, 1.87493574941, 0.8570973898),
    (2, 2.27238342807, 0.9144799374), (3, 3.1725772879, 0.9668264334),
    (4, 4.12719354254, 0.9829920968), (5, 5.10106963949, 0.9894890262),
    (8, 8.06275016608, 0.9960219673), (10, 10.0501269367, 0.9974710806),
    (20, 20.0250156841, 0.9993732302),
]  # fmt: skip

# Methods sheet 1.3: n, a, E[M], SD.
CHANNELS = [
    (4, 1, 2.90886329, 0.7338354), (4, 4, 4.81278582, 0.9149277), (4, 10, 10.3456902, 0.983206),
    (8, 1, 4.05942126, 0.7218719), (8, 4, 5.59028672, 0.8652712), (8, 10, 10.7268938, 0.9663074),
    (16, 4, 6.88009965, 0.8150023), (16, 10, 11.4507546, 0.9381997),
    (32, 10, 12.7747735, 0.8973082),
]  # fmt: skip

# Methods sheet 4.1: a, Fisher information, and slope²/variance (what the mean alone tells).
INFORMATION = [
    (0.25, 0.058872, 0.054618), (0.5, 0.201696, 0.192361), (0.75, 0.368873, None),
    (1, 0.521447, 0.515762), (1.25, 0.644652, None), (1.5, 0.737547, 0.736324),
    (2, 0.852632, 0.852444), (2.5, 0.910245, None), (3, 0.940151, 0.940144), (4, 0.967605, None),
    (5, 0.979562, 0.979562), (6, 0.985906, None), (8, 0.992124, None),
    (10, 0.994974, 0.994974), (20, 0.998748, None),
]  # fmt: skip


def density(m: float, a: float, n: int) -> float:
    """Noncentral chi, from SciPy's noncentral chi-square."""
    return float(2.0 * m * stats.ncx2.pdf(m * m, 2 * n, a * a))


def expectation(function, a: float, n: int) -> float:
    centre = np.sqrt(a * a + 2 * n)
    value, _ = integrate.quad(
        lambda m: function(m) * density(m, a, n), max(centre - 12, 0), centre + 12, limit=200
    )
    return float(value)


def test_amplitude_falls_by_e_after_one_t2star() -> None:
    # Definition: R2* = 250 /s, T2* = 4 ms.
    assert amplitude(100.0, 250.0, [4.0, 8.0]) == pytest.approx(100.0 * np.exp([-1.0, -2.0]))


@pytest.mark.parametrize(("n", "mean", "variance"), BACKGROUND)
def test_background_is_as_published(n: int, mean: float, variance: float) -> None:
    assert noise_floor(n) == pytest.approx(mean, rel=1e-7)
    assert expected_magnitude(0.0, n) == pytest.approx(mean, rel=1e-7)
    assert magnitude_variance(0.0, n) == pytest.approx(variance, rel=1e-10)


@pytest.mark.parametrize(("a", "mean", "sd"), RICIAN)
def test_rician_mean_and_sd_are_as_tabulated(a: float, mean: float, sd: float) -> None:
    assert expected_magnitude(a) == pytest.approx(mean, rel=1e-11)
    assert np.sqrt(magnitude_variance(a)) == pytest.approx(sd, rel=1e-9)


@pytest.mark.parametrize(("n", "a", "mean", "sd"), CHANNELS)
def test_noncentral_chi_mean_and_sd_are_as_tabulated(
    n: int, a: float, mean: float, sd: float
) -> None:
    assert expected_magnitude(a, n) == pytest.approx(mean, rel=5e-9)
    assert np.sqrt(magnitude_variance(a, n)) == pytest.approx(sd, rel=2e-7)


def test_rician_moments_are_those_of_scipy() -> None:
    a = np.array([0.0, 0.1, 0.7, 1.3, 2.8, 6.0, 15.0, 29.9, 30.1])
    assert expected_magnitude(a) == pytest.approx(stats.rice.mean(a), rel=1e-10)
    assert magnitude_variance(a) == pytest.approx(stats.rice.var(a), rel=1e-8)


@pytest.mark.parametrize("n", [2, 5, 16])
@pytest.mark.parametrize("a", [0.0, 0.8, 3.0, 12.0])
def test_moments_of_several_channels_are_those_of_scipys_noncentral_chi_square(
    n: int, a: float
) -> None:
    mean = expectation(lambda m: m, a, n)
    assert expected_magnitude(a, n) == pytest.approx(mean, rel=1e-9)
    # Exact second moment: A² + 2n (methods sheet 1.2).
    assert magnitude_variance(a, n) == pytest.approx(a * a + 2 * n - mean**2, rel=1e-7)


@pytest.mark.parametrize("n", [1, 2, 4, 8])
def test_mean_and_slope_are_the_hypergeometric_closed_forms(n: int) -> None:
    # Constantinides 1997; derivative as in the methods sheet 1.2.
    a = np.linspace(0.05, 8.0, 40)
    beta = np.sqrt(2) * special.gamma(n + 0.5) / special.gamma(n)
    mean = beta * special.hyp1f1(-0.5, n, -(a**2) / 2)
    slope = beta * a / (2 * n) * special.hyp1f1(0.5, n + 1, -(a**2) / 2)
    assert expected_magnitude(a, n) == pytest.approx(mean, rel=1e-10)
    assert signal.expected_slope(a, n) == pytest.approx(slope, rel=1e-9)


@pytest.mark.parametrize("n", [1, 3, 16, 64])
def test_slope_is_the_numerical_derivative_of_the_mean(n: int) -> None:
    a = np.array([0.3, 1.0, 2.5, 7.0, 25.0, 60.0])
    step = 1e-3
    rise = expected_magnitude(a + step, n) - expected_magnitude(a - step, n)
    assert signal.expected_slope(a, n) == pytest.approx(rise / (2 * step), abs=2e-7)


def test_mean_has_no_step_where_closed_form_and_series_meet() -> None:
    # The series of the methods sheet 1.1 to a⁻⁵ is good to 1e-11 at a = 30.
    a = np.array([29.0, 29.999999, 30.0, 30.000001, 31.0, 100.0, 1e4, 1e6])
    series = 1 / (2 * a) + 1 / (8 * a**3) + 3 / (16 * a**5)
    assert signal.expected_excess(a) == pytest.approx(series, rel=1e-7)


@pytest.mark.parametrize("n", [1, 2, 8, 64])
def test_functions_hold_at_any_amplitude(n: int) -> None:
    # Limits: excess (n - 1/2)/a, variance 1, slope 1, information 1 - (n - 1/2)/a² (sheet 4.1).
    a = np.array([3e4, 1e5, 1e6])
    assert signal.expected_excess(a, n) * a == pytest.approx(n - 0.5, rel=1e-3)
    assert magnitude_variance(a, n) == pytest.approx(1.0, abs=1e-5)
    assert signal.expected_slope(a, n) == pytest.approx(1.0, abs=1e-6)
    assert signal.information(a, n) == pytest.approx(1.0, abs=1e-6)


@pytest.mark.parametrize(("a", "value", "of_mean"), INFORMATION)
def test_rician_information_is_as_tabulated(a: float, value: float, of_mean: float | None) -> None:
    assert signal.information(a) == pytest.approx(value, abs=6e-7)
    if of_mean is not None:
        told = signal.expected_slope(a) ** 2 / magnitude_variance(a)
        assert told == pytest.approx(of_mean, abs=6e-7)


@pytest.mark.parametrize("n", [1, 2, 8, 32])
def test_information_has_its_limits(n: int) -> None:
    # Small a: the score is a (m²/2n - 1), of variance a²/n, a² for one channel; large a: sheet 4.1.
    small, large = np.array([1e-3, 1e-2]), np.array([60.0, 200.0]) * np.sqrt(n)
    assert signal.information(small, n) * n / small**2 == pytest.approx(1.0, rel=2e-4)
    assert (1 - signal.information(large, n)) * large**2 == pytest.approx(n - 0.5, rel=0.01)


@pytest.mark.parametrize("n", [1, 2, 4, 16])
@pytest.mark.parametrize("a", [0.5, 2.0, 6.0])
def test_information_is_the_mean_square_of_scipys_score(n: int, a: float) -> None:
    step = 1e-4

    def squared_score(m: float) -> float:
        rise = stats.ncx2.logpdf(m * m, 2 * n, (a + step) ** 2)
        rise -= stats.ncx2.logpdf(m * m, 2 * n, (a - step) ** 2)
        return float((rise / (2 * step)) ** 2)

    assert signal.information(a, n) == pytest.approx(expectation(squared_score, a, n), rel=1e-5)


@pytest.mark.parametrize("n", [1, 2, 8, 32])
def test_quadrature_has_enough_nodes(n: int, monkeypatch: pytest.MonkeyPatch) -> None:
    a = np.geomspace(1e-3, 1e3, 40)
    before = signal.information(a, n)
    monkeypatch.setattr(signal, "_QUADRATURE_NODES", 192)
    assert before == pytest.approx(signal.information(a, n), abs=1e-10)


def test_bessel_ratio_is_as_tabulated() -> None:
    # Methods sheet 7.1, I1/I0.
    ratio = {1: 0.4463899658965345, 2: 0.6977746579640079, 3.75: 0.8531704594530685,
             10: 0.9485998259548459, 50: 0.9899489673784978}  # fmt: skip
    assert signal.bessel_ratio(list(ratio)) == pytest.approx(list(ratio.values()), rel=1e-13)


@pytest.mark.parametrize("n", [1, 4, 64])
def test_bessel_functions_hold_where_the_librarys_end(n: int) -> None:
    # I_n/I_(n-1) tends to 1 - (n - 1/2)/z, e^-z I to 1/sqrt(2 pi z) (A&S 9.7.1); near 0: z/2n.
    z = np.array([1e8, 1.1e8, 2e9, 1e12])
    assert signal.bessel_ratio(z, n) == pytest.approx(1 - (n - 0.5) / z, rel=1e-14)
    log_i = signal.log_likelihood_kernel(z, n) + (n - 1) * np.log(z)
    assert log_i == pytest.approx(-0.5 * np.log(2 * np.pi * z), abs=1e-4 if n == 64 else 1e-6)
    assert signal.bessel_ratio([0.0, 1e-200], n) == pytest.approx([0.0, 1e-200 / (2 * n)])


@pytest.mark.parametrize("n", [1, 4, 32])
@pytest.mark.parametrize("a", [1e-3, 0.7, 5.0, 40.0])
def test_likelihood_is_scipys_up_to_terms_in_the_data(n: int, a: float) -> None:
    m = np.linspace(max(np.sqrt(a * a + 2 * n) - 4, 0.05), np.sqrt(a * a + 2 * n) + 4, 9)
    ours = -((m - a) ** 2) / 2 + signal.log_likelihood_kernel(m * a, n)
    scipys = stats.ncx2.logpdf(m**2, 2 * n, a**2) + np.log(2 * m)
    in_data = ours - scipys + (2 * n - 1) * np.log(m)
    assert in_data == pytest.approx(np.full(9, in_data[0]), abs=1e-8)


@pytest.mark.parametrize("a", [0.3, 1.0, 3.0, 8.0])
def test_mean_logarithm_under_our_density_is_the_exponential_integral(a: float) -> None:
    # E[ln M] = ln A + E1(a²/2)/2 (methods sheet 1.1; a = 1: 0.2798867974).
    value, _ = integrate.quad(
        lambda m: m * np.log(m)
        * np.exp(-((m - a) ** 2) / 2 + float(signal.log_likelihood_kernel(m * a))),
        0, a + 14, limit=200,
    )  # fmt: skip
    assert value == pytest.approx(np.log(a) + special.exp1(a * a / 2) / 2, abs=1e-8)
    if a == 1.0:
        assert value == pytest.approx(0.2798867974, abs=1e-9)
