"""A region's voxels, sorted by what may be said of them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.fit import DecayFit, FitOutcome
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


def sort_voxels(mask: Mask, fit: DecayFit, limit: float) -> VoxelCounts:
    """Sort the voxels of `mask` by the outcome of their fit and the region's limit (1/s)."""
    outcome, rate = fit.outcome, fit.r2star_per_s
    converged = mask & (outcome == FitOutcome.CONVERGED)
    beyond = np.zeros_like(mask)
    beyond[converged] = rate[converged] > limit
    no_signal = mask & (outcome == FitOutcome.NO_SIGNAL)
    return VoxelCounts(
        measured=converged & ~beyond,
        over=beyond | no_signal | (mask & (outcome == FitOutcome.AT_UPPER_BOUND)),
        under=mask & (outcome == FitOutcome.AT_LOWER_BOUND),
        failed=mask & np.isin(outcome, (FitOutcome.NOT_CONVERGED, FitOutcome.NOT_FITTED)),
        no_signal=no_signal,
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
