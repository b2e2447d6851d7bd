"""Between which R2* a region can be measured in this scan."""

from __future__ import annotations

from dataclasses import dataclass

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
"""If voxels know R2* to no better than this share anywhere, their median is biased by some percent:
they are fitted together, or the region is refused."""
_RESOLVED = 0.5
"""An S0 counts if its voxel's R2* is known at least to this share."""


@dataclass(frozen=True, slots=True, kw_only=True)
class UpperLimit:
    """Up to which R2* a region can be measured, and what that was worked out for.

    Attributes
    ----------
    r2star_per_s : float
        Where one voxel of this S0 and sigma reaches the stated share of R2*, 1/s; where none does
        anywhere, what voxels measure best.
    s0 : float
        Signal at echo time zero, signal units.
    best : float or None
        Relative standard error where voxels measure best, if that exceeds the stated share.
    findings : tuple of Finding
        ``s0-from-elsewhere``, ``voxels-imprecise``.
    """

    r2star_per_s: float
    s0: float
    best: float | None
    findings: tuple[Finding, ...]

    @property
    def is_too_coarse(self) -> bool:
        """Whether single voxels know so little that not even their median stands."""
        return self.best is not None and not self.best <= _COARSEST


def upper_limit(
    name: str,
    mask: Mask,
    stack: EchoStack,
    noise: NoiseLevel,
    fit: DecayFit,
    *,
    voxel_relative_se: float,
) -> UpperLimit:
    """Upper reportable limit of a region, for one voxel of its S0 and sigma.

    Parameters
    ----------
    name : str
        The region's name.
    mask : ndarray of bool, shape (X, Y, Z)
        Its voxels.
    stack, noise, fit
        Images, the region's noise (its sigma is the region's own), and fits.
    voxel_relative_se : float
        Share of R2* that one voxel's standard error may reach.

    Returns
    -------
    UpperLimit
        With the error of sigma in it.

    Raises
    ------
    StudyRefused
        ``no-tissue-signal``.
    """
    s0, findings = _own_s0(name, mask, stack, fit)
    limit = upper_limit_per_s(
        stack.echo_times_ms, s0, noise.sigma, relative=voxel_relative_se, n=noise.n_channels,
        sigma_relative_sd=noise.relative_sd,
    )  # fmt: skip
    if not np.isnan(limit):
        return UpperLimit(r2star_per_s=limit, s0=s0, best=None, findings=findings)
    # No voxel reaches the share anywhere. Up to where voxels are measured best, the median of many
    # still stands; beyond, fast and slow decays look alike.
    snr = s0 / noise.sigma
    limit, best = best_measured(
        stack.echo_times_ms, snr, n=noise.n_channels, sigma_relative_sd=noise.relative_sd
    )
    coarse = Finding.of(
        "voxels-imprecise", region=name, snr=f"{snr:.1f}", relative=f"{100 * voxel_relative_se:g}",
        best=f"{100 * best:.0f}",
    )  # fmt: skip
    return UpperLimit(r2star_per_s=limit, s0=s0, best=best, findings=(*findings, coarse))


def _own_s0(
    name: str, mask: Mask, stack: EchoStack, fit: DecayFit
) -> tuple[float, tuple[Finding, ...]]:
    """S0 that the region itself tells, or that of the darker quarter of the other tissue."""
    resolved = (fit.outcome == FitOutcome.CONVERGED) & (
        fit.r2star_se_per_s < _RESOLVED * fit.r2star_per_s
    )
    if (resolved & mask).sum() >= _OWN_SHARE * mask.sum():
        return float(np.median(fit.s0[resolved & mask])), ()
    converged = mask & (fit.outcome == FitOutcome.CONVERGED)
    is_slow = (
        converged.sum() >= _OWN_SHARE * mask.sum()
        and np.median(fit.r2star_per_s[converged]) * stack.echo_times_ms[-1] * 1e-3 < 1.0
    )
    if is_slow or (fit.outcome[mask] == FitOutcome.AT_LOWER_BOUND).mean() >= _OWN_SHARE:
        # Slow decay: R2* is known poorly as a share of itself, S0 very well.
        return float(np.nanmedian(fit.s0[mask])), ()
    elsewhere = fit.s0[resolved & ~mask]
    if not len(elsewhere):
        raise StudyRefused(Finding.of("no-tissue-signal", region=name))
    s0 = float(np.percentile(elsewhere, _DARKER_QUARTER))
    return s0, (Finding.of("s0-from-elsewhere", region=name),)
