"""The autoregressive estimator, against methods sheet 2.2 and a second way of writing it."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate

from liverfe.fit.comparators.autoregressive import rate_without_noise_per_s, simpson_weights
from tests.fit.decays import TWELVE_MS, decay, fit, magnitudes

# Methods sheet 2.2: T2* as estimated over true, noise-free, by x = R times spacing.
RATIOS = {
    0.1: 1.00000055, 0.25: 1.00002154, 0.5: 1.00033715, 0.8: 1.00211312, 1.0: 1.00495718,
    1.5: 1.02203814, 2.0: 1.05917057, 3.0: 1.20461296,
}  # fmt: skip
"""The sheet prints 1.20461265 at x = 3; its own formula gives 1.204612963, which stands here."""


@pytest.mark.parametrize("x", RATIOS)
@pytest.mark.parametrize("n_echoes", [3, 8, 12])
def test_without_noise_it_is_short_by_the_closed_form(x: float, n_echoes: int) -> None:
    spacing_ms = 0.7
    rate = 1e3 * x / spacing_ms
    times = 1.1 + spacing_ms * np.arange(n_echoes)
    assert rate / rate_without_noise_per_s(rate, spacing_ms) == pytest.approx(RATIOS[x], abs=6e-9)
    fitted = fit(decay(1e4, rate, times), times, model="autoregressive")
    # Magnitudes and result are stored in single precision.
    assert rate / fitted.r2star_per_s[0] == pytest.approx(RATIOS[x], rel=5e-7)


def test_its_reading_stays_finite_and_below_three_over_the_spacing() -> None:
    # 3 sinh x / (cosh x + 2) -> 3 (methods sheet 2.2).
    read = rate_without_noise_per_s([0.0, 1e4, 1e7], 0.8)
    assert read[0] == 0.0
    assert read == pytest.approx([0.0, 3e3 / 0.8 * np.sinh(8) / (np.cosh(8) + 2), 3e3 / 0.8])


def test_simpson_weights_of_unequal_spacing_are_as_tabulated() -> None:
    # Methods sheet 2.2: samples at 0, 1 and 2.5.
    assert simpson_weights(1.0, 1.5) == pytest.approx((0.2083333, 1.7361111, 0.5555556), abs=5e-8)
    assert simpson_weights(0.8, 0.8) == pytest.approx((0.8 / 3, 3.2 / 3, 0.8 / 3))
    # They integrate every parabola, as SciPy's rule does.
    for parabola in np.random.default_rng(21).uniform(-2, 2, (5, 3)):
        x = np.array([0.3, 1.1, 2.9])
        y = np.polyval(parabola, x)
        weights = np.array(simpson_weights(0.8, 1.8))
        assert weights @ y == pytest.approx(integrate.simpson(y, x=x), rel=1e-12)


def test_noisy_decays_give_the_published_formula() -> None:
    # Pei 2015 with its erratum, equal spacing (methods sheet 2.2), written over whole arrays.
    rng = np.random.default_rng(22)
    m = magnitudes(decay(np.full(200, 30.0), 250.0, TWELVE_MS), rng).astype(float)
    third = 0.8 / 3
    s = third * (m[:, :-2] + 4 * m[:, 1:-1] + m[:, 2:])
    d = m[:, :-2] - m[:, 2:]
    t2star_ms = ((s * s).sum(axis=1) + third * (s * d).sum(axis=1)) / (
        third * (d * d).sum(axis=1) + (s * d).sum(axis=1)
    )
    found = fit(m, TWELVE_MS, model="autoregressive")
    assert found.r2star_per_s == pytest.approx(1e3 / t2star_ms, rel=2e-6)


def test_unequal_spacing_is_no_harm_to_a_slow_decay() -> None:
    # With the plain weights h/3 (1, 4, 1) this set would read tens of percent wrong.
    times = np.array([1.0, 1.9, 3.4, 4.1, 6.0, 7.2])
    fitted = fit(decay(1e4, [20.0, 60.0, 120.0], times), times, model="autoregressive")
    assert fitted.r2star_per_s == pytest.approx([20.0, 60.0, 120.0], rel=1e-3)
    assert fitted.s0 == pytest.approx([1e4] * 3, rel=1e-3)


def test_two_echoes_are_too_few_for_it() -> None:
    fitted = fit(decay(100, 50, np.array([1.0, 2.0])), [1.0, 2.0], model="autoregressive")
    assert np.isnan(fitted.r2star_per_s[0])
    assert fitted.outcome[0] == 0
