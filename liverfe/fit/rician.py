"""Maximum likelihood under the noise of magnitude images: the estimator of the house."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtri

from liverfe.fit.blocks import run_in_blocks
from liverfe.fit.kernels import fit_maximum_likelihood
from liverfe.fit.rows import DecayRows
from liverfe.fit.tables import signal_tables

_NO_SIGNAL_CHANCE = 1e-3
"""A voxel has no signal if its summed power is within this chance of pure noise ..."""
_NO_FIRST_ECHO_CHANCE = 1e-4
"""... and its first echo within this: one bright echo is a decay too fast, not an absence."""
_MAX_RATE_TIMES_FIRST_ECHO = 12.0
"""Upper bound of R2*: at this multiple of 1 / TE1 a signal of any scanner is gone at TE1."""


def fit_rician_ml(
    signal: NDArray[np.float32],
    echo_times_ms: NDArray[np.float64],
    sigma: NDArray[np.float64],
    n: int,
) -> DecayRows:
    """Fit a mono-exponential decay by maximum likelihood, voxel by voxel.

    Fisher scoring in (ln S0, R2*) from a weighted log-linear start, with step halving on the exact
    log-likelihood of Rician (n = 1) or noncentral-chi magnitudes.

    Parameters
    ----------
    signal : ndarray of float32, shape (V, E)
        Magnitudes, signal units.
    echo_times_ms : ndarray of float64, shape (E,)
        Echo times in ms.
    sigma : ndarray of float64, shape (1,) or (V,)
        Noise SD per channel, signal units.
    n : int
        Effective number of channels.

    Returns
    -------
    DecayRows
        One row a voxel; standard errors from the Fisher information at the maximum.

    References
    ----------
    Sijbers 1998 (maximum likelihood for Rician magnitudes); Gudbjartsson 1995; Constantinides 1997.
    """
    n_voxels, n_echoes = signal.shape
    rows = DecayRows.empty(n_voxels)
    tables = signal_tables(n)
    power = float(chdtri(2 * n * n_echoes, _NO_SIGNAL_CHANCE))
    first = float(np.sqrt(chdtri(2 * n, _NO_FIRST_ECHO_CHANCE)))
    max_rate = _MAX_RATE_TIMES_FIRST_ECHO / float(echo_times_ms[0])

    def work(block: slice) -> None:
        fit_maximum_likelihood(
            signal[block], echo_times_ms, sigma if len(sigma) == 1 else sigma[block],
            n, max_rate, power, first,
            tables.ratio, tables.kernel, tables.excess, tables.information,
            tables.product_scale, tables.amplitude_scale,
            rows.r2star_per_s[block], rows.s0[block], rows.r2star_se_per_s[block],
            rows.reduced_chi2[block], rows.outcome[block],
        )  # fmt: skip

    run_in_blocks(work, n_voxels)
    return rows
