"""A region's voxels, sorted by what may be said of them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.fit import DecayFit, FitOutcome, n_clear_echoes
from liverfe.noise import NoiseLevel
from liverfe.regions.statistics import outliers

Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class VoxelCounts:
    """One mask for each kind; `no_signal` is a part of `over`."""

    measured: Mask
    over: Mask
    under: Mask
    failed: Mask
    no_signal: Mask


def sort_voxels(
    mask: Mask, stack: EchoStack, noise: NoiseLevel, fit: DecayFit, limit: float
) -> VoxelCounts:
    """Sort the voxels of `mask` by the outcome of their fit and the region's limit (1/s).

    A voxel whose fit predicts signal in fewer than two echoes is not measured: one echo bounds R2*
    from below and no more, so it counts as over the limit.
    """
    outcome, rate = fit.outcome, fit.r2star_per_s
    converged = mask & (outcome == FitOutcome.CONVERGED)
    beyond = np.zeros_like(mask)
    beyond[converged] = rate[converged] > limit
    beyond[converged] |= usable_echoes(converged, stack, noise, fit) < 2
    no_signal = mask & (outcome == FitOutcome.NO_SIGNAL)
    return VoxelCounts(
        measured=converged & ~beyond,
        over=beyond | no_signal | (mask & (outcome == FitOutcome.AT_UPPER_BOUND)),
        under=mask & (outcome == FitOutcome.AT_LOWER_BOUND),
        failed=mask & np.isin(outcome, (FitOutcome.NOT_CONVERGED, FitOutcome.NOT_FITTED)),
        no_signal=no_signal,
    )


def usable_echoes(
    voxels: Mask, stack: EchoStack, noise: NoiseLevel, fit: DecayFit
) -> NDArray[np.intp]:
    """Count the echoes in which the fit of a voxel predicts signal (`n_clear_echoes`).

    Parameters
    ----------
    voxels : ndarray of bool, shape (X, Y, Z)
        V voxels with a fit.
    stack, noise, fit
        Images, noise and fits.

    Returns
    -------
    ndarray of int, shape (V,)
        By the predicted amplitude, not by the magnitude, which noise lifts.
    """
    sigma = noise.sigma if noise.sigma_map is None else noise.sigma_map[voxels]
    return n_clear_echoes(
        stack.echo_times_ms, fit.r2star_per_s[voxels], fit.s0[voxels], sigma, n=noise.n_channels
    )


def censored_sample(fit: DecayFit, measured: Mask, counts: VoxelCounts) -> NDArray[np.float64]:
    """All voxels that say something, ascending, censored ones at infinity."""
    values = np.sort(fit.r2star_per_s[measured].astype(np.float64))
    under, over = int(counts.under.sum()), int(counts.over.sum())
    return np.concatenate([np.full(under, -np.inf), values, np.full(over, np.inf)])


def trimmed_voxels(fit: DecayFit, counts: VoxelCounts, *, mads: float | None) -> Mask:
    """Outliers by the MAD rule; none where `mads` is None."""
    trimmed = np.zeros_like(counts.measured)
    if mads is None or not counts.measured.any():
        return trimmed
    rate = fit.r2star_per_s[counts.measured].astype(np.float64)
    censored = censored_sample(fit, np.zeros_like(counts.measured), counts)
    far = outliers(np.concatenate([rate, censored]), mads)[: len(rate)]
    trimmed[counts.measured] = far
    return trimmed
