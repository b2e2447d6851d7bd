"""Bounds and limits, against the sheets' tables, closed forms and refits."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import optimize

from liverfe.fit import (
    clear_amplitude,
    n_clear_echoes,
    r2star_bound_per_s,
    r2star_shift_per_s,
    reportable_range,
    s0_relative_bound,
    upper_limit_per_s,
)
from tests.fit.decays import PROTOCOLS_MS, TWELVE_MS, Array, decay, fit, magnitudes

RATES = (50, 100, 200, 500, 800, 1000, 1500)
# Methods sheet 4.2, Rician bound in 1/s.
BOUNDS = [
    ("1.0+0.8k", 20, (6.882, 9.118, 16.08, 69.58, 185.7, 320.2, 1118)),
    ("1.0+0.8k", 50, (2.750, 3.640, 6.371, 25.98, 67.77, 114.3, 361.5)),
    ("1.0+0.8k", 100, (1.375, 1.819, 3.182, 12.74, 32.97, 55.22, 169.0)),
    ("0.99+1.13k", 50, (2.139, 3.117, 6.411, 29.37, 77.15, 132.6, 459.8)),
    ("1.2k", 50, (3.384, 4.484, 7.887, 33.51, 94.75, 172.4, 738)),
    ("1.3+2.2k", 50, (2.230, 3.582, 8.481, 45.57, 154.1, 351.1, 6823)),
    ("0.8+0.7k", 50, (3.024, 3.848, 6.247, 22.28, 54.49, 87.64, 240.3)),
]
# Methods sheet 4.3, on a grid of 10 /s: where one voxel is known to 10 %. None: not stated.
RANGES = {
    "1.0+0.8k": ((90, 329), (50, 559), (30, 909), (None, 1408), (None, 1917)),
    "0.99+1.13k": ((60, 280), (40, 489), (20, 819), (None, 1278), (None, 1717)),
    "1.2k": ((150, 200), (60, 429), (40, 709), (None, 1098), (None, 1488)),
    "0.8+0.7k": ((100, 399), (60, 679), (30, 1098), (None, 1727), (None, 2336)),
    "1.3+2.2k": ((70, 160), (40, 310), (20, 529), (None, 829), (None, 1098)),
}
# Users' sheet, "Reportable limit": TE1, spacing, echoes; R2* at 10, 20 and 50 % for S0/sigma of 20,
# 50 and 100. Left out (None): two cells at 20, where 10 % is reached nowhere.
LIMITS = [
    ((0.9, 0.7, 12), (384, 805, 1431), (1030, 1554, 2249), (1619, 2159, 2763)),
    ((1.0, 1.2, 12), (276, 629, 1165), (805, 1265, 1687), (1265, 1687, 2072)),
    ((1.4, 1.2, 8), (None, 512, 910), (655, 988, 1373), (1020, 1330, 1730)),
    ((2.4, 2.4, 6), (None, 275, 503), (355, 553, 759), (571, 759, 947)),
]


@pytest.mark.parametrize(("protocol", "snr", "values"), BOUNDS)
def test_bound_is_as_tabulated(protocol: str, snr: float, values: tuple[float, ...]) -> None:
    found = r2star_bound_per_s(PROTOCOLS_MS[protocol], RATES, snr, 1.0)
    assert found == pytest.approx(values, rel=6e-4)


@pytest.mark.parametrize("n", [1, 16])
def test_bound_at_high_snr_is_the_gaussian_closed_form(n: int) -> None:
    # SD = sigma sqrt(Σe² / (Σe² Σ(S0 t e)² - (Σ S0 t e²)²)), methods sheet 4.1.
    for times in PROTOCOLS_MS.values():
        t, e = times * 1e-3, np.exp(-0.2 * times)
        see, stt, ste = (e**2).sum(), ((t * e) ** 2).sum(), (t * e**2).sum()
        gaussian = np.sqrt(see / (see * stt - ste**2)) * 3.0 / 3e5
        found = r2star_bound_per_s(times, 200.0, 3e5, 3.0, n=n)
        assert found == pytest.approx(gaussian, rel=1e-5)


def test_bound_of_s0_at_high_snr_is_the_gaussian_closed_form() -> None:
    # Inverse of the information matrix of S0 exp(-R t) in (S0, R), Gaussian noise (methods 4.1).
    t, e = TWELVE_MS * 1e-3, np.exp(-0.2 * TWELVE_MS)
    gradient = np.stack([e, -t * 1e5 * e])
    expected = np.sqrt(np.linalg.inv(gradient @ gradient.T)[0, 0]) / 1e5
    assert s0_relative_bound(TWELVE_MS, 200.0, 1e5, 1.0) == pytest.approx(expected, rel=1e-5)


def test_bound_broadcasts_and_is_infinite_without_information() -> None:
    found = r2star_bound_per_s(
        TWELVE_MS, np.array([[50.0], [500.0]]), np.array([20.0, 50.0, 1e-9]), 1.0
    )
    assert found.shape == (2, 3)
    assert found[0, 1] == pytest.approx(2.750, rel=6e-4)
    assert np.isinf(r2star_bound_per_s([2.0], 100.0, 50.0, 1.0))
    assert found[1, 2] > 1e6


@pytest.mark.parametrize("protocol", RANGES)
def test_range_is_as_tabulated(protocol: str) -> None:
    for snr, (low, high) in zip((20, 30, 50, 100, 200), RANGES[protocol], strict=True):
        found = reportable_range(PROTOCOLS_MS[protocol], snr)
        assert found is not None
        # The sheet's grid of 10 /s keeps the last point inside.
        assert found[1] == pytest.approx(high, abs=11)
        if low is not None:
            assert found[0] == pytest.approx(low, abs=10)


@pytest.mark.parametrize(("protocol", "at_20", "at_50", "at_100"), LIMITS)
def test_limits_are_those_of_the_users_sheet(
    protocol: tuple[float, float, int], at_20: tuple[float | None, ...],
    at_50: tuple[float | None, ...], at_100: tuple[float | None, ...],
) -> None:  # fmt: skip
    times = protocol[0] + protocol[1] * np.arange(protocol[2])
    for snr, cells in ((20, at_20), (50, at_50), (100, at_100)):
        for relative, cell in zip((0.1, 0.2, 0.5), cells, strict=True):
            found = reportable_range(times, snr, relative=relative)
            if cell is None:
                assert found is None
            else:
                assert found is not None
                assert found[1] == pytest.approx(cell, rel=0.04)  # the sheet's steps are 2 to 4 %


def test_two_echoes_are_best_at_the_published_optimum() -> None:
    # t1 -> 0: x = R t2 solves x = 1 + e^-2x, 1.108858; SD(R)/R = 2.878279/SNR0 (methods sheet 4.3).
    snr = 1e6

    def relative(x: float) -> float:
        return float(r2star_bound_per_s([1e-9, 10.0], 100.0 * x, snr, 1.0)) / (100.0 * x) * snr

    best = optimize.minimize_scalar(relative, bounds=(0.5, 2.0), method="bounded",
                                    options={"xatol": 1e-8})  # fmt: skip
    assert best.x == pytest.approx(1.108858, abs=5e-6)
    assert best.fun == pytest.approx(2.878279, abs=1e-6)


@pytest.mark.parametrize("n", [1, 8])
@pytest.mark.parametrize(("snr", "rate"), [(20, 300), (50, 300), (50, 800), (100, 1000)])
def test_shift_is_what_refits_with_another_sigma_move(n: int, snr: float, rate: float) -> None:
    rng = np.random.default_rng(17)
    signal = magnitudes(decay(np.full(12_000, snr), rate, TWELVE_MS), rng, n)
    high, low = (
        fit(signal, TWELVE_MS, sigma=s, n=n).r2star_per_s.astype(float) for s in (1.01, 0.99)
    )
    moved = np.median((high - low)[np.isfinite(high - low)]) / 0.02
    assert float(r2star_shift_per_s(TWELVE_MS, rate, snr, 1.0, n=n)) == pytest.approx(
        moved, rel=0.05
    )


def test_shift_vanishes_with_noise() -> None:
    assert abs(float(r2star_shift_per_s(TWELVE_MS, 100.0, 1e5, 1.0))) < 1e-4


def test_limit_is_where_the_bound_crosses_the_share() -> None:
    times = np.array([1.0, 1.5, 3.0, 5.0, 9.0])
    for relative in (0.05, 0.1, 0.3):
        limit = upper_limit_per_s(times, 600.0, 6.0, relative=relative)
        reached = float(r2star_bound_per_s(times, limit, 600.0, 6.0)) / limit
        assert reached == pytest.approx(relative, rel=2e-3)


def test_an_error_of_sigma_lowers_the_limit() -> None:
    limits = [
        upper_limit_per_s(TWELVE_MS, 50.0, 1.0, sigma_relative_sd=share) for share in (0, 0.1, 0.3)
    ]
    assert limits[0] > limits[1] > limits[2]
    shift = 0.3 * float(r2star_shift_per_s(TWELVE_MS, limits[2], 50.0, 1.0))
    bound = float(r2star_bound_per_s(TWELVE_MS, limits[2], 50.0, 1.0))
    assert np.hypot(shift, bound) == pytest.approx(0.1 * limits[2], rel=5e-3)


def test_limits_rise_with_snr_and_fall_with_late_echoes() -> None:
    by_snr = [upper_limit_per_s(TWELVE_MS, snr, 1.0) for snr in (15, 20, 40, 80, 500)]
    later = [upper_limit_per_s(TWELVE_MS + late, 50.0, 1.0) for late in (0.0, 1.0, 3.0)]
    assert by_snr == sorted(by_snr)
    assert later == sorted(later, reverse=True)


def test_there_is_no_range_where_nothing_can_be_measured() -> None:
    assert reportable_range(TWELVE_MS, 3.0) is None
    assert reportable_range(TWELVE_MS, 0.0) is None
    assert reportable_range(TWELVE_MS, float("nan")) is None
    assert reportable_range([2.0], 100.0) is None
    assert np.isnan(upper_limit_per_s(TWELVE_MS, 3.0, 1.0))


@pytest.mark.parametrize("snr", [20.0, 50.0, 1000.0])
def test_every_rate_inside_the_range_is_known_to_the_share(snr: float) -> None:
    # A promise that a reader makes use of: no hole between the two limits.
    for times in PROTOCOLS_MS.values():
        low, high = reportable_range(times, snr) or (np.nan, np.nan)
        inside: Array = np.geomspace(low, high, 500)
        share = r2star_bound_per_s(times, inside, snr, 1.0) / inside
        assert share.max() < 0.1 * 1.003


# Methods sheet 4.1 [computed]: information of a Rician magnitude, in units of a Gaussian one's.
INFORMATION = {0.5: 0.201696, 1.0: 0.521447, 1.5: 0.737547, 2.0: 0.852632, 3.0: 0.940151}


@pytest.mark.parametrize("a", INFORMATION)
def test_an_echo_is_clear_from_the_amplitude_that_holds_the_share(a: float) -> None:
    assert clear_amplitude(1, share=INFORMATION[a]) == pytest.approx(a, rel=2e-4)


def test_more_channels_need_more_signal_to_be_clear() -> None:
    found = [clear_amplitude(n) for n in (1, 2, 8, 32)]
    assert found == sorted(found)
    assert found[0] == pytest.approx(0.966, abs=0.005)  # the same table, interpolated at a half


def test_clear_echoes_are_counted_by_the_predicted_amplitude() -> None:
    """Against the amplitudes written out; nothing and no decay at the ends."""
    rate, level = np.array([0.0, 100.0, 500.0, 3000.0, 100.0, np.nan]), np.array([50.0] * 6)
    level[4] = 0.5
    amplitudes = decay(level, rate, TWELVE_MS)
    expected = (amplitudes >= clear_amplitude()).sum(axis=1)
    found = n_clear_echoes(TWELVE_MS, rate, level, 1.0)
    assert found.tolist() == expected.tolist()
    assert found[0] == 12
    assert found[3] == 1
    assert found[4] == 0
