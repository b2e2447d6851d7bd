"""The decay figure shows what one decay leaves over, where that is known."""

from __future__ import annotations

import dataclasses

import numpy as np

from liverfe.regions import RegionDecay
from liverfe.report.decay_plot import draw_decay


def decay(residual: np.ndarray | None) -> RegionDecay:
    times = np.array([1.0, 2.2, 3.4, 4.6])
    signal = 100.0 * np.exp(-0.1 * times)
    return RegionDecay(
        echo_times_ms=times,
        signal=signal,
        signal_low=0.9 * signal,
        signal_high=1.1 * signal,
        curve_times_ms=np.linspace(0.0, 5.0, 20),
        curve=100.0 * np.exp(-0.1 * np.linspace(0.0, 5.0, 20)),
        noise_floor=2.0,
        residual=residual,
        residual_se=None if residual is None else np.full(4, 0.05),
    )


def test_residuals_are_drawn_below_the_decay() -> None:
    drawn = draw_decay(decay(np.array([0.1, -0.9, 0.2, 0.3])), is_limit=False)
    assert "residual / σ" in drawn
    assert drawn != draw_decay(decay(np.array([0.1, 0.9, 0.2, 0.3])), is_limit=False)


def test_without_residuals_and_at_a_limit_there_is_no_strip() -> None:
    """A curve at the limit is no fit: what lies off it is no residual."""
    known = decay(np.array([0.1, -0.9, 0.2, 0.3]))
    plain = draw_decay(dataclasses.replace(known, residual=None, residual_se=None), is_limit=False)
    assert "residual" not in plain
    assert "residual" not in draw_decay(known, is_limit=True)
