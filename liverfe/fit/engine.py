"""`fit_decays`: maximum likelihood of any signal model under the noise of magnitude images."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtri

from liverfe.fit.blocks import run_in_blocks
from liverfe.fit.compiled import as_argument
from liverfe.fit.kernels import fit_voxels
from liverfe.fit.likelihood_kernels import work_array
from liverfe.fit.signal_models import SignalModel, echo_times_of
from liverfe.fit.tables import signal_tables

Array = NDArray[np.float64]

NO_SIGNAL_CHANCE = 1e-3
"""A voxel has no signal if its summed power is within this chance of pure noise ..."""
NO_FIRST_ECHO_CHANCE = 1e-4
"""... and its first echo within this: one bright echo is a decay too fast, not an absence."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class LikelihoodFits:
    """Fits of V voxels by a signal model of P parameters.

    Attributes
    ----------
    parameters, standard_errors : ndarray of float64, shape (V, P)
        ln S0 (signal units), R2* in 1/s, then the model's own, with standard errors from the
        Fisher information at the maximum; NaN where there is no fit.
    log_likelihood : ndarray of float64, shape (V,)
        At the maximum, with all its terms (density per signal unit), so that it can be compared
        between noise levels, channel numbers and signal models.
    log_det_information : ndarray of float64, shape (V,)
        Logarithm of the determinant of the Fisher information in the parameters (R2* in 1/ms).
    reduced_chi2 : ndarray of float32, shape (V,)
        Misfit over its expectation; NaN without degrees of freedom.
    outcome : ndarray of uint8, shape (V,)
        A `FitOutcome` each.
    """

    parameters: Array
    standard_errors: Array
    log_likelihood: Array
    log_det_information: Array
    reduced_chi2: NDArray[np.float32]
    outcome: NDArray[np.uint8]


def fit_decays(
    signal: NDArray[np.float32],
    model: SignalModel,
    sigma: Array,
    n: int,
    *,
    usable: NDArray[np.bool_] | None = None,
    rows: NDArray[np.intp] | None = None,
) -> LikelihoodFits:
    """Fit a signal model to each voxel by exact Rician or noncentral-chi maximum likelihood.

    Fisher scoring with step halving in double precision: first one exponential, from two starts,
    then the model's own parameters from each of its starts; the greatest likelihood is kept.

    Parameters
    ----------
    signal : ndarray of float32, shape (V, E)
        Magnitudes, signal units.
    model : SignalModel
        From `mono_exponential`, `shaped_decay` or `fat_water_decay`.
    sigma : ndarray of float64, shape (1,) or (V,)
        Noise SD per channel, signal units.
    n : int
        Effective number of channels.
    usable : ndarray of bool, shape (V, E) or (1, E), or None
        Echoes that count; None: all.
    rows : ndarray of intp, shape (R,), or None
        Voxels to fit, in this order; None: all.

    Returns
    -------
    LikelihoodFits
        One row for each of `rows`. Voxels with fewer usable echoes than parameters are not fitted.

    References
    ----------
    Sijbers 1998 (maximum likelihood for Rician magnitudes); Gudbjartsson 1995; Constantinides 1997.
    """
    times = echo_times_of(model)
    wanted = np.arange(len(signal)) if rows is None else rows
    echoes = np.ones((1, len(times)), dtype=bool) if usable is None else usable
    n_rows, n_p = len(wanted), len(model.lower)
    fits = LikelihoodFits(
        parameters=np.full((n_rows, n_p), np.nan),
        standard_errors=np.full((n_rows, n_p), np.nan),
        log_likelihood=np.full(n_rows, np.nan),
        log_det_information=np.full(n_rows, np.nan),
        reduced_chi2=np.full(n_rows, np.nan, dtype=np.float32),
        outcome=np.zeros(n_rows, dtype=np.uint8),
    )
    noise = signal_tables(n).for_kernels()
    power = no_signal_powers(len(times), n)
    first = no_signal_first(n)

    def work(block: slice) -> None:
        some = wanted[block]
        fit_voxels(
            model,
            as_argument(signal[some]),
            as_argument(echoes if len(echoes) == 1 else echoes[some]),
            as_argument(times),
            as_argument(sigma if len(sigma) == 1 else sigma[some]),
            noise,
            as_argument(power),
            first,
            work_array(len(times), n_p),
            fits.parameters[block],
            fits.standard_errors[block],
            fits.log_likelihood[block],
            fits.log_det_information[block],
            fits.reduced_chi2[block],
            fits.outcome[block],
        )

    run_in_blocks(work, n_rows)
    fits.parameters[:, 1] *= 1e3
    fits.standard_errors[:, 1] *= 1e3
    return fits


def no_signal_powers(n_echoes: int, n: int) -> Array:
    """Summed power in sigma² below which so many echoes are noise; shape (E + 1,)."""
    counts = np.arange(n_echoes + 1)
    return np.where(counts > 0, chdtri(np.maximum(2 * n * counts, 1), NO_SIGNAL_CHANCE), 0.0)


def no_signal_first(n: int) -> float:
    """First echo in sigma below which it is noise."""
    return float(np.sqrt(chdtri(2 * n, NO_FIRST_ECHO_CHANCE)))
