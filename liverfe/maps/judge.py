"""From fits to maps: each voxel judged by what this scan can resolve."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.fit import DecayFit, FitOutcome, n_clear_echoes, upper_limit_per_s
from liverfe.maps.decay_maps import DecayMaps, VoxelStatus
from liverfe.noise import NoiseLevel
from liverfe.units import t2star_ms_from_r2star_per_s

_LIMIT_POINTS = 40
"""Limits are worked out at this many SNRs and interpolated: the curve is smooth."""

_STATUS_OF_OUTCOME = np.array(
    [
        VoxelStatus.OUTSIDE,  # not fitted
        VoxelStatus.MEASURED,  # converged
        VoxelStatus.UNDER_LIMIT,  # at the lower bound
        VoxelStatus.OVER_LIMIT,  # at the upper bound
        VoxelStatus.FAILED,  # not converged
        VoxelStatus.OUTSIDE,  # no signal
    ],
    dtype=np.uint8,
)


def judge(
    fit: DecayFit, stack: EchoStack, noise: NoiseLevel, *, voxel_relative_se: float = 0.10
) -> DecayMaps:
    """Judge every voxel by its own S0: is its R2* within what this scan can measure?

    Parameters
    ----------
    fit : DecayFit
        Fits of the stack.
    stack : EchoStack
        For its echo times and grid.
    noise : NoiseLevel
        Sigma and channels.
    voxel_relative_se : float
        The upper limit lies where the standard error bound reaches this share of R2*. A voxel with
        signal in fewer than two echoes is over it too.

    Returns
    -------
    DecayMaps
        NaN wherever a voxel is not measured; a value beyond the limit is never shown.
    """
    status = _STATUS_OF_OUTCOME[fit.outcome]
    measured = status == VoxelStatus.MEASURED
    sigma = noise.sigma if noise.sigma_map is None else noise.sigma_map[measured]
    limit = _limits(stack, noise, fit.s0[measured] / sigma, voxel_relative_se)
    rate = fit.r2star_per_s[measured]
    # Signal in one echo only bounds R2* from below and no more.
    echoes = n_clear_echoes(stack.echo_times_ms, rate, fit.s0[measured], sigma, n=noise.n_channels)
    over = (rate > limit) | (echoes < 2)
    # NaN limit: too little signal to measure anything; that is a failure, not a fast decay.
    judged = np.where(over, VoxelStatus.OVER_LIMIT, VoxelStatus.MEASURED)
    status[measured] = np.where(np.isnan(limit), VoxelStatus.FAILED, judged)
    return _maps(fit, stack, status)


def repaint(
    maps: DecayMaps,
    fit: DecayFit,
    stack: EchoStack,
    *,
    mask: NDArray[np.bool_],
    over_limit: NDArray[np.bool_],
    measured: NDArray[np.bool_],
) -> DecayMaps:
    """Let a region's own judgement of its voxels stand in the maps.

    Parameters
    ----------
    maps : DecayMaps
        Maps so far.
    fit : DecayFit
        The fits behind them.
    stack : EchoStack
        The stack behind those.
    mask, over_limit, measured : ndarray of bool, shape (X, Y, Z)
        The region, and its voxels beyond and within the region's limit.

    Returns
    -------
    DecayMaps
        With the region's voxels as the region counts them.
    """
    status = np.array(maps.status)
    status[mask & over_limit] = VoxelStatus.OVER_LIMIT
    status[mask & measured] = VoxelStatus.MEASURED
    return _maps(fit, stack, status)


def _maps(fit: DecayFit, stack: EchoStack, status: NDArray[np.uint8]) -> DecayMaps:
    hidden = status != VoxelStatus.MEASURED
    shown = {
        name: np.where(hidden, np.float32(np.nan), getattr(fit, name))
        for name in ("r2star_per_s", "s0", "r2star_se_per_s", "reduced_chi2")
    }
    return DecayMaps(
        grid=stack.grid,
        t2star_ms=t2star_ms_from_r2star_per_s(shown["r2star_per_s"]),
        status=status,
        no_signal=fit.outcome == FitOutcome.NO_SIGNAL,
        **shown,
    )


def _limits(
    stack: EchoStack, noise: NoiseLevel, snr: NDArray[np.float32], relative: float
) -> NDArray[np.float64]:
    """Upper limit of each voxel from its S0 over sigma, interpolated."""
    if not len(snr):
        return np.zeros(0)
    points = np.geomspace(1.0, max(float(snr.max()), 2.0), _LIMIT_POINTS)
    limits = np.array(
        [
            upper_limit_per_s(
                stack.echo_times_ms, point, 1.0, relative=relative, n=noise.n_channels,
                sigma_relative_sd=noise.relative_sd,
            )
            for point in points
        ]
    )  # fmt: skip
    known = ~np.isnan(limits)
    if not known.any():
        return np.full(len(snr), np.nan)
    # Below the first point there is no limit: an S0 of zero lies there too.
    at = np.log(np.maximum(snr, 0.5 * points[0]))
    reached = np.interp(at, np.log(points[known]), limits[known], left=np.nan)
    return np.asarray(reached)
