"""Between which R2* a region can be measured in this scan."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import DecayFit, FitOutcome, best_measured, upper_limit_per_s
from liverfe.noise import NoiseLevel

Mask = NDArray[np.bool_]

_OWN_SHARE = 0.5
"""A region speaks for its own S0 if this share of its voxels has one."""
_DARKER_QUARTER = 25.0
"""Percentile of the other tissue's S0 that stands in: a low S0 makes a low, safe limit."""
_COARSEST = 0.30
"""A region is refused if its voxels know R2* to no better than this share anywhere: their median is
biased by some percent there."""
_RESOLVED = 0.5
"""An S0 counts if its voxel's R2* is known at least to this share."""


def upper_limit(
    name: str,
    mask: Mask,
    stack: EchoStack,
    noise: NoiseLevel,
    fit: DecayFit,
    *,
    voxel_relative_se: float,
) -> tuple[float, float, tuple[Finding, ...]]:
    """Upper reportable limit of a region, for one voxel of its S0 and sigma.

    Parameters
    ----------
    name : str
        The region's name.
    mask : ndarray of bool, shape (X, Y, Z)
        Its voxels.
    stack, noise, fit
        Images, noise and fits.
    voxel_relative_se : float
        Share of R2* that one voxel's standard error may reach.

    Returns
    -------
    limit_per_s : float
        In 1/s.
    s0 : float
        The S0 it was computed for, signal units.
    findings : tuple of Finding
        ``s0-from-elsewhere`` where the region itself does not tell S0.

    Raises
    ------
    StudyRefused
        ``no-tissue-signal``, ``signal-too-low``.
    """
    resolved = (fit.outcome == FitOutcome.CONVERGED) & (
        fit.r2star_se_per_s < _RESOLVED * fit.r2star_per_s
    )
    findings: tuple[Finding, ...] = ()
    if (resolved & mask).sum() >= _OWN_SHARE * mask.sum():
        s0 = float(np.median(fit.s0[resolved & mask]))
    elif (fit.outcome[mask] == FitOutcome.AT_LOWER_BOUND).mean() >= _OWN_SHARE or (
        (fit.outcome[mask] == FitOutcome.CONVERGED).mean() >= _OWN_SHARE
        and np.median(fit.r2star_per_s[mask & (fit.outcome == FitOutcome.CONVERGED)])
        * stack.echo_times_ms[-1] * 1e-3 < 1.0
    ):  # fmt: skip
        # Slow decay: R2* is known poorly as a share of itself, S0 very well.
        s0 = float(np.nanmedian(fit.s0[mask]))
    else:
        elsewhere = fit.s0[resolved & ~mask]
        if not len(elsewhere):
            raise StudyRefused(Finding.of("no-tissue-signal", region=name))
        s0 = float(np.percentile(elsewhere, _DARKER_QUARTER))
        findings = (Finding.of("s0-from-elsewhere", region=name),)
    limit = upper_limit_per_s(
        stack.echo_times_ms, s0, noise.sigma, relative=voxel_relative_se, n=noise.n_channels,
        sigma_relative_sd=noise.relative_sd,
    )  # fmt: skip
    if np.isnan(limit):
        # No voxel reaches the share anywhere. Up to where voxels are measured best, the median of
        # many still stands; beyond, fast and slow decays look alike.
        snr = s0 / noise.sigma
        limit, best = best_measured(
            stack.echo_times_ms, snr, n=noise.n_channels, sigma_relative_sd=noise.relative_sd
        )
        told = {"region": name, "snr": f"{snr:.1f}", "relative": f"{100 * voxel_relative_se:g}"}
        if not best <= _COARSEST:
            raise StudyRefused(Finding.of("signal-too-low", **told))
        coarse = Finding.of("voxels-imprecise", best=f"{100 * best:.0f}", **told)
        findings = (*findings, coarse)
    return limit, s0, findings
