"""Least-squares estimators as the field knows them, for comparison with the house's."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.fit.blocks import run_in_blocks
from liverfe.fit.least_squares_kernels import fit_moments, fit_projected
from liverfe.fit.log_linear import fit_log_linear
from liverfe.fit.rows import DecayRows
from liverfe.fit.tables import signal_tables

_KEPT_ABOVE_SIGMA = 2.5
"""Truncation keeps the leading echoes above this many sigma (methods: kappa = 2.5) ..."""
_KEPT_AT_LEAST = 3
"""... and at least this many."""
_MAX_RATE_TIMES_FIRST_ECHO = 12.0
"""Upper bound of R2*, as in `liverfe.fit.rician`."""


def fit_least_squares(
    signal: NDArray[np.float32],
    echo_times_ms: NDArray[np.float64],
    *,
    n_kept: NDArray[np.int64] | None = None,
    with_offset: bool = False,
) -> DecayRows:
    """Fit ``S0 exp(-R2* TE)``, optionally plus a constant, by plain least squares.

    The linear parameters are projected out and R2* is searched for on a grid and then by golden
    section, so no start can trap it. A free constant is no noise correction: it makes high R2*
    read too high (Feng 2013).

    Parameters
    ----------
    signal : ndarray of float32, shape (V, E)
        Magnitudes.
    echo_times_ms : ndarray of float64, shape (E,)
        Echo times in ms.
    n_kept : ndarray of int64, shape (V,), or None
        Leading echoes to use of each voxel; None: all.
    with_offset : bool
        Fit a constant too.

    Returns
    -------
    DecayRows
        R2*, S0 and outcome.
    """
    n_voxels, n_echoes = signal.shape
    rows = DecayRows.empty(n_voxels)
    kept = np.full(n_voxels, n_echoes) if n_kept is None else n_kept
    max_rate = _MAX_RATE_TIMES_FIRST_ECHO / float(echo_times_ms[0])

    def work(block: slice) -> None:
        fit_projected(
            signal[block], echo_times_ms, kept[block], max_rate, with_offset,
            rows.r2star_per_s[block], rows.s0[block], rows.outcome[block],
        )  # fmt: skip

    run_in_blocks(work, n_voxels)
    return rows


def fit_truncated(
    signal: NDArray[np.float32], echo_times_ms: NDArray[np.float64], sigma: float
) -> DecayRows:
    """Least squares on the leading echoes above the noise (2.5 sigma, at least three).

    Makes very high R2* read too low (Feng 2013). Arguments as in `fit_least_squares`.
    """
    above = signal > _KEPT_ABOVE_SIGMA * sigma
    leading = np.cumprod(above, axis=1).sum(axis=1)
    kept = np.clip(leading, min(_KEPT_AT_LEAST, signal.shape[1]), None).astype(np.int64)
    return fit_least_squares(signal, echo_times_ms, n_kept=kept)


def fit_moment(
    signal: NDArray[np.float32],
    echo_times_ms: NDArray[np.float64],
    sigma: float,
    n: int,
    *,
    order: int,
) -> DecayRows:
    """Least squares of the magnitude, or its square, on its expectation under noise (Feng 2013).

    Parameters
    ----------
    signal, echo_times_ms
        As in `fit_least_squares`.
    sigma : float
        Noise SD per channel, signal units.
    n : int
        Effective number of channels.
    order : int
        1: first moment; 2: second moment.

    Returns
    -------
    DecayRows
        R2*, S0 and outcome.
    """
    tables = signal_tables(n)
    start = fit_truncated(signal, echo_times_ms, sigma)
    rough = fit_log_linear(np.maximum(signal, 1e-6 * sigma), echo_times_ms, weighted=True)
    rate = np.where(np.isfinite(start.r2star_per_s), start.r2star_per_s, rough.r2star_per_s)
    s0 = np.where(np.isfinite(start.s0), start.s0, rough.s0)
    rows = DecayRows.empty(len(signal))
    max_rate = _MAX_RATE_TIMES_FIRST_ECHO / float(echo_times_ms[0])

    def work(block: slice) -> None:
        fit_moments(
            signal[block], echo_times_ms, sigma, n, order, max_rate, rate[block], s0[block],
            tables.excess, tables.amplitude_scale,
            rows.r2star_per_s[block], rows.s0[block], rows.outcome[block],
        )  # fmt: skip

    run_in_blocks(work, len(signal))
    return rows
