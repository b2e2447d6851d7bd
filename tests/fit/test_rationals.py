"""The quotients of the lanes, against SciPy's special functions, in single precision as used."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import special

from liverfe.fit.rationals import signal_rationals
from liverfe.fit.signal import expected_excess, information

CHANNELS = (1, 2, 3, 4, 6, 8, 12, 16, 24, 32, 48, 64)
BRIGHTEST = 500.0
"""In sigma; brighter voxels do not go through the lanes."""


def quotient(rational: np.ndarray, x: np.ndarray) -> np.ndarray:
    single = x.astype(np.float32)
    return (np.polyval(rational[0], single) / np.polyval(rational[1], single)).astype(float)


@pytest.mark.parametrize("n", CHANNELS)
def test_the_shortfall_is_that_of_scipys_bessel_ratio(n: int) -> None:
    # z (1 - I_n(z) / I_{n-1}(z)); its error pulls at a decay, and 12 echoes of it move R2* by less
    # than a thousandth of a standard error while it is below 1e-4.
    rational = signal_rationals(n)
    x = np.concatenate([[0.0], np.geomspace(1e-4, BRIGHTEST**2, 3000)])
    z = np.float32(x).astype(float)
    below = special.ive(n - 1, z)
    ratio = np.where(below > 1e-250, special.ive(n, z) / np.maximum(below, 1e-250), z / (2 * n))
    error = np.abs(quotient(rational.shortfall, x) - z * (1.0 - ratio))
    assert error.max() < 5e-5


@pytest.mark.parametrize("n", CHANNELS)
def test_expected_excess_and_variance_are_those_of_the_equations(n: int) -> None:
    # `expected_excess` itself is held against the methods sheet in test_signal.py. The variance
    # 2n - d (2a + d) cancels at high signal, where it must still be 1 to two in a thousand.
    rational = signal_rationals(n)
    x = np.concatenate([[0.0], np.geomspace(1e-4, BRIGHTEST, 1500)])
    a = np.float32(x).astype(float)
    excess, exact = quotient(rational.excess, x), expected_excess(a, n)
    assert np.abs(excess - exact).max() < 5e-4
    variance = (2 * n - excess * (2 * a + excess)) / (2 * n - exact * (2 * a + exact))
    assert np.abs(variance - 1.0).max() < 2e-3


@pytest.mark.parametrize("n", CHANNELS)
def test_information_is_that_of_the_quadrature(n: int) -> None:
    rational = signal_rationals(n)
    x = np.concatenate([[0.0], np.geomspace(1e-4, BRIGHTEST**2, 1500)])
    a = np.sqrt(np.float32(x).astype(float))
    assert np.abs(quotient(rational.information, x) - information(a, n)).max() < 1e-4
