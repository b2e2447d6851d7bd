"""Mono-exponential maximum likelihood under the noise of magnitude images: the house's estimator.

Nearly all voxels are fitted sixteen at a time (`liverfe.fit.lane_kernels`); those that are anything
but plain go to the engine (`liverfe.fit.engine`). Both climb the same likelihood.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.fit.blocks import run_in_blocks
from liverfe.fit.compiled import as_argument
from liverfe.fit.decay import FitOutcome
from liverfe.fit.engine import LikelihoodFits, fit_decays, no_signal_first, no_signal_powers
from liverfe.fit.lane_kernels import LEFT_TO_ENGINE, UNSETTLED, LaneNoise, fit_in_lanes
from liverfe.fit.lanes import WIDTH
from liverfe.fit.rationals import signal_rationals
from liverfe.fit.rows import DecayRows
from liverfe.fit.signal_models import max_rate_per_ms, mono_exponential

_EVEN = 1e-6
"""Echo spacings that differ by less than this share are the same."""


def fit_rician_ml(
    signal: NDArray[np.float32],
    echo_times_ms: NDArray[np.float64],
    sigma: NDArray[np.float64],
    n: int,
    *,
    usable: NDArray[np.bool_] | None = None,
) -> DecayRows:
    """Fit a mono-exponential decay by maximum likelihood, voxel by voxel.

    Parameters
    ----------
    signal : ndarray of float32, shape (V, E)
        Magnitudes, signal units; any memory order.
    echo_times_ms : ndarray of float64, shape (E,)
        Echo times in ms.
    sigma : ndarray of float64, shape (1,) or (V,)
        Noise SD per channel, signal units.
    n : int
        Effective number of channels.
    usable : ndarray of bool, shape (V, E), or None
        Echoes that count in each voxel; None: all.

    Returns
    -------
    DecayRows
        One row a voxel; standard errors from the Fisher information at the maximum.

    References
    ----------
    Sijbers 1998 (maximum likelihood for Rician magnitudes); Gudbjartsson 1995; Constantinides 1997.
    """
    if usable is None:
        rows = DecayRows.unwritten(len(signal))
        _fit_in_lanes(rows, signal, echo_times_ms, sigma, n)
        left = np.flatnonzero(rows.outcome == LEFT_TO_ENGINE)
    else:
        rows = DecayRows.empty(len(signal))
        left = np.arange(len(signal))
    if len(left):
        model = mono_exponential(echo_times_ms)
        rows.put(left, _rows_of(fit_decays(signal, model, sigma, n, usable=usable, rows=left)))
    return rows


def _rows_of(fits: LikelihoodFits) -> DecayRows:
    """The engine's fits of one exponential as rows: numbers only where there is a decay."""
    rows = DecayRows.empty(len(fits.outcome))
    rows.outcome[:] = fits.outcome
    shown = np.isin(fits.outcome, (FitOutcome.CONVERGED, FitOutcome.AT_LOWER_BOUND))
    rows.r2star_per_s[shown] = fits.parameters[shown, 1]
    rows.s0[shown] = np.exp(fits.parameters[shown, 0])
    rows.r2star_se_per_s[shown] = fits.standard_errors[shown, 1]
    rows.reduced_chi2[shown] = fits.reduced_chi2[shown]
    return rows


def warm_up() -> None:
    """Compile what every study needs, or load it where it was compiled before.

    The first time on a machine this takes seconds; whoever has something else to wait for meanwhile
    (files, say) calls it in a thread of its own.
    """
    times = np.array([1.0, 2.0, 3.0])
    bright_and_dim = np.outer([1e4, 30.0], np.exp(-0.1 * times)).astype(np.float32)
    fit_rician_ml(bright_and_dim, times, np.ones(1), 1)


def _fit_in_lanes(
    rows: DecayRows,
    signal: NDArray[np.float32],
    echo_times_ms: NDArray[np.float64],
    sigma: NDArray[np.float64],
    n: int,
) -> None:
    times = echo_times_ms.astype(np.float32)
    quotients = signal_rationals(n)
    noise = LaneNoise(
        n=n,
        shortfall=quotients.shortfall,
        excess=quotients.excess,
        information=quotients.information,
        least_power=float(no_signal_powers(len(times), n)[-1]),
        least_first=no_signal_first(n),
    )
    max_rate = max_rate_per_ms(echo_times_ms)
    spacing = np.diff(echo_times_ms)
    is_even = bool(np.ptp(spacing) <= _EVEN * spacing[0])

    def work(block: slice) -> None:
        fit_block(
            signal[block], sigma if len(sigma) == 1 else sigma[block], rows.part(block), again=False
        )
        unsettled = np.flatnonzero(rows.outcome[block] == UNSETTLED) + block.start
        if len(unsettled):
            some = rows.copy_of(unsettled)
            fit_block(
                signal[unsettled], sigma if len(sigma) == 1 else sigma[unsettled], some, again=True
            )
            some.outcome[some.outcome == UNSETTLED] = LEFT_TO_ENGINE
            rows.put(unsettled, some)

    def fit_block(
        some: NDArray[np.float32], its_sigma: NDArray[np.float64], out: DecayRows, *, again: bool
    ) -> None:
        scratch = np.empty(len(times) * WIDTH, np.float32), np.empty(5 * WIDTH, np.float32)
        fit_in_lanes(
            as_argument(some),
            as_argument(times),
            is_even,
            as_argument(its_sigma),
            noise,
            max_rate,
            again,
            *scratch,
            out.r2star_per_s,
            out.s0,
            out.r2star_se_per_s,
            out.reduced_chi2,
            out.outcome,
        )

    run_in_blocks(work, len(signal))
