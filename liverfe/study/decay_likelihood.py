"""The likelihood of a decay, as the room of noise asks for it: it comes before the fit."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.fit import fit_decays, mono_exponential

Array = NDArray[np.float64]


def decay_likelihood(
    signal: NDArray[np.float32], echo_times_ms: Array, sigma: Array, n: int
) -> tuple[Array, Array]:
    """Fit one exponential to each voxel: its log-likelihood and how much it says of the decay.

    Parameters
    ----------
    signal : ndarray of float32, shape (V, E)
        Magnitudes.
    echo_times_ms : ndarray of float64, shape (E,)
        Echo times in ms.
    sigma : ndarray of float64, shape (1,) or (V,)
        Noise SD per channel.
    n : int
        Effective number of channels.

    Returns
    -------
    tuple of ndarray of float64, shape (V,)
        Greatest log-likelihood, and log determinant of the Fisher information in ln S0 and R2*.
    """
    fits = fit_decays(signal, mono_exponential(echo_times_ms), sigma, n)
    return fits.log_likelihood, fits.log_det_information
