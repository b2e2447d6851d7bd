"""`profile_r2star`: how likely each R2* is in each voxel, its S0 being the best for it."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from liverfe.fit.blocks import run_in_blocks
from liverfe.fit.compiled import as_argument
from liverfe.fit.likelihood_kernels import work_array
from liverfe.fit.profile_kernels import profile_voxels
from liverfe.fit.tables import signal_tables

Array = NDArray[np.float64]


def profile_r2star(
    signal: NDArray[np.float32],
    echo_times_ms: ArrayLike,
    r2star_per_s: ArrayLike,
    sigma: Array,
    n: int,
) -> Array:
    """Log-likelihood of each voxel at each of K rates, S0 profiled out.

    Summed over voxels that share one R2*, each with its own S0, it is the likelihood of that R2*.

    Parameters
    ----------
    signal : ndarray of float32, shape (V, E)
        Magnitudes, signal units.
    echo_times_ms : array_like, shape (E,)
        Echo times in ms.
    r2star_per_s : array_like, shape (K,)
        Rates in 1/s, ascending.
    sigma : ndarray of float64, shape (1,) or (V,)
        Noise SD per channel, signal units.
    n : int
        Effective number of channels.

    Returns
    -------
    ndarray of float64, shape (V, K)
        With all terms (density per signal unit); NaN where an echo is no magnitude.
    """
    rates = np.asarray(r2star_per_s, dtype=np.float64) * 1e-3
    times = np.asarray(echo_times_ms, dtype=np.float64)
    noise = signal_tables(n).for_kernels()
    out = np.full((len(signal), len(rates)), np.nan)

    def work(block: slice) -> None:
        some = sigma if len(sigma) == 1 else sigma[block]
        profile_voxels(
            as_argument(signal[block]), as_argument(times), as_argument(rates), as_argument(some),
            noise, work_array(len(times), 2), out[block],
        )  # fmt: skip

    run_in_blocks(work, len(signal))
    return out
