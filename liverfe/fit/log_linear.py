"""Straight lines through the logarithm of the signal: the plainest estimators, for comparison.

They collapse at high R2* (a true 800 /s reads 197 /s at an SNR of 20), so they never give a result
of the house; see `liverfe.fit.rician`.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.fit.decay import FitOutcome
from liverfe.fit.rows import DecayRows


def fit_log_linear(
    signal: NDArray[np.float32], echo_times_ms: NDArray[np.float64], *, weighted: bool
) -> DecayRows:
    """Fit ``ln M`` against echo time by (weighted) linear least squares.

    Parameters
    ----------
    signal : ndarray of float32, shape (V, E)
        Magnitudes; a voxel with a zero has no logarithm and is not fitted.
    echo_times_ms : ndarray of float64, shape (E,)
        Echo times in ms.
    weighted : bool
        Weight each echo by M², the inverse variance of its logarithm at high SNR.

    Returns
    -------
    DecayRows
        R2* and S0; standard errors and misfit are filled in by `liverfe.fit.fit_r2star`.
    """
    rows = DecayRows.empty(len(signal))
    usable = np.isfinite(signal).all(axis=1) & (signal > 0).all(axis=1)
    m = signal[usable].astype(np.float64)
    t = echo_times_ms
    w = m**2 if weighted else np.ones_like(m)
    w = w / w.sum(axis=1, keepdims=True)
    y = np.log(m)
    mean_t, mean_y = (w * t).sum(axis=1, keepdims=True), (w * y).sum(axis=1, keepdims=True)
    slope = (w * (t - mean_t) * (y - mean_y)).sum(axis=1) / (w * (t - mean_t) ** 2).sum(axis=1)
    rows.r2star_per_s[usable] = -1e3 * slope
    rows.s0[usable] = np.exp(mean_y[:, 0] - slope * mean_t[:, 0])
    rows.outcome[usable] = FitOutcome.CONVERGED
    return rows
