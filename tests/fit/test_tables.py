"""The tables that the compiled loops use, against the equations that they stand for."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.fit import signal
from liverfe.fit.tables import N_INTERVALS, look_up, signal_tables

STATED_ERROR = 1e-8
"""In the docstring of `liverfe.fit.tables`."""
CHANNELS = (1, 2, 4, 8, 16, 32, 64)


def arguments(scale: float, n_points: int) -> np.ndarray:
    """0, 1e-6 ... 1e6, and both sides of every joint between two pieces."""
    joints = np.arange(1, N_INTERVALS) / N_INTERVALS
    joints = np.concatenate([joints - 1e-9, joints, joints + 1e-9])
    return np.concatenate([[0.0], np.geomspace(1e-6, 1e6, n_points), scale * joints / (1 - joints)])


@pytest.mark.parametrize("n", CHANNELS)
def test_bessel_tables_hold_their_stated_error(n: int) -> None:
    tables = signal_tables(n)
    z = arguments(tables.product_scale, 20_000)
    u = z / (z + tables.product_scale)
    ratio = look_up(tables.ratio, u) - signal.bessel_ratio(z, n)
    kernel = look_up(tables.kernel, u) - (n - 0.5) * np.log(z + tables.product_scale)
    assert np.abs(ratio).max() < STATED_ERROR
    assert np.abs(kernel - signal.log_likelihood_kernel(z, n)).max() < STATED_ERROR


@pytest.mark.parametrize("n", CHANNELS)
def test_moment_tables_hold_their_stated_error(n: int) -> None:
    tables = signal_tables(n)
    a = arguments(tables.amplitude_scale, 300)
    u = a / (a + tables.amplitude_scale)
    excess = look_up(tables.excess, u) - signal.expected_excess(a, n)
    information = look_up(tables.information, u) - signal.information(a, n)
    assert np.abs(excess).max() < STATED_ERROR
    assert np.abs(information).max() < STATED_ERROR
