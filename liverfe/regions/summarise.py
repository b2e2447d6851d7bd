"""`summarise_region`: from a region's voxels to one number with its interval, or a limit."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import DecayFit, amplitude, expected_magnitude, noise_floor
from liverfe.noise import NoiseLevel
from liverfe.regions.counts import censored_sample, sort_voxels, trimmed_voxels
from liverfe.regions.doubts import DecayCheck, check_decay, examine_decay
from liverfe.regions.joint import JointFit, fit_jointly
from liverfe.regions.limits import UpperLimit, upper_limit
from liverfe.regions.summary import R2StarSummary, RegionDecay, RegionSummary, ReportableLimits
from liverfe.regions.value import RegionRules, joint_value, region_value
from liverfe.regions.voxel_findings import (
    check_echoes,
    count_findings,
    share_finding,
    uneven_iron,
)

Mask = NDArray[np.bool_]

_MOST_FAILED = 0.50
_CURVE_POINTS = 120


def summarise_region(
    name: str,
    organ: str,
    mask: Mask,
    stack: EchoStack,
    noise: NoiseLevel,
    fit: DecayFit,
    rules: RegionRules,
    *,
    source: str = "",
    findings: tuple[Finding, ...] = (),
    lic_mg_per_g: Callable[[float], float] | None = None,
) -> RegionSummary:
    """Summarise the voxels of a region.

    The value is the median of all voxels that are not outliers, voxels over the limit counting at
    the upper end and voxels under it at the lower: it stands while less than
    ``rules.censored_share`` of them are over the limit, else the region is ``>`` the limit. Sigma
    is the region's own where it varies over the image. Where no voxel can tell R2* to 30 %
    anywhere, one fit of all decays stands in, if it may (`liverfe.regions.joint`).

    Parameters
    ----------
    name, organ : str
        As in `Region`.
    mask : ndarray of bool, shape (X, Y, Z)
        Its voxels, at least one.
    stack : EchoStack
        The images.
    noise : NoiseLevel
        Their noise.
    fit : DecayFit
        Their fits.
    rules : RegionRules
        Choices of the method.
    source : str
        As in `Region`.
    findings : tuple of Finding
        What is known of the region already.
    lic_mg_per_g : callable or None
        From R2* to LIC, so that a doubt can state its effect on both.

    Returns
    -------
    RegionSummary
        With counts, value, interval, limits, decay curve and findings.

    Raises
    ------
    StudyRefused
        ``signal-rises``, ``saturated``, ``most-failed``, ``no-tissue-signal``, ``signal-too-low``.
    """
    noise = noise_in(mask, noise)
    decay_findings = () if organ == "background" else check_decay(name, mask, stack, noise)
    reach, joint = _reach(name, mask, stack, noise, fit, rules)
    limit, s0 = reach.r2star_per_s, reach.s0
    counts = sort_voxels(mask, stack, noise, fit, limit)
    n_voxels, n_failed = int(mask.sum()), int(counts.failed.sum())
    if n_failed > _MOST_FAILED * n_voxels:
        raise StudyRefused(share_finding("most-failed", name, n_failed, n_voxels))
    mads = rules.trim_mads if rules.trim == "mad" and joint is None else None
    trimmed = trimmed_voxels(fit, counts, mads=mads)
    used = counts.measured & ~trimmed
    sample = censored_sample(fit, used, counts)
    r2star, low_limit = (
        region_value(sample, used, counts, stack, noise, fit, rules, limit=limit, s0=s0)
        if joint is None
        else joint_value(joint, sample, fit.r2star_per_s[used].astype(np.float64))
    )
    chi2 = fit.reduced_chi2[used]
    median_chi2 = float(np.median(chi2)) if used.any() and np.isfinite(chi2).all() else None
    if r2star.qualifier == ">" and decay_findings:
        # A decay too fast to see cannot come back at a later echo: the echoes are out of order.
        raise StudyRefused(Finding.of("echoes-out-of-order", region=name), *decay_findings)
    summary_findings = (
        *findings,
        *reach.findings,
        *count_findings(name, counts, used, trimmed, n_voxels, limit, r2star),
        *check_echoes(name, used, stack, noise, fit),
    )
    if r2star.qualifier == "=" and organ == "liver" and joint is None:
        summary_findings += uneven_iron(name, sample, stack, noise, r2star.value, s0)
    check = DecayCheck(findings=decay_findings)
    if organ != "background" and (r2star.qualifier != ">" or stack.n_echoes == 2):
        check = examine_decay(
            name, used | counts.over, stack, noise, fit, known=decay_findings,
            tells=r2star.qualifier == "=", lic=lic_mg_per_g if organ == "liver" else None,
        )  # fmt: skip
    summary_findings += check.findings
    if organ == "background":
        # Noise is what it is drawn for: that it does not decay is no doubt about the study.
        summary_findings = ()
    return RegionSummary(
        name=name,
        organ=organ,
        source=source,
        mask=mask,
        used=used,
        over_limit=counts.over,
        volume_ml=n_voxels * stack.grid.voxel_volume_ml,
        n_slices=int(mask.any(axis=(0, 1)).sum()),
        n_voxels=n_voxels,
        n_used=int(used.sum()),
        n_over_limit=int(counts.over.sum()),
        n_under_limit=int(counts.under.sum()),
        n_no_signal=int(counts.no_signal.sum()),
        n_failed=n_failed,
        n_trimmed=int(trimmed.sum()),
        r2star=r2star,
        limits=ReportableLimits(
            low_r2star_per_s=low_limit, high_r2star_per_s=limit, s0=s0, sigma=noise.sigma
        ),
        decay=_decay(mask, used, stack, noise, r2star, s0, check),
        median_reduced_chi2=median_chi2,
        findings=summary_findings,
    )


def noise_in(mask: Mask, noise: NoiseLevel) -> NoiseLevel:
    """Noise as a region has it: its sigma is the median of the map there, if there is a map.

    Parameters
    ----------
    mask : ndarray of bool, shape (X, Y, Z)
        The region's voxels.
    noise : NoiseLevel
        Of the whole image.

    Returns
    -------
    NoiseLevel
        The same without a map.
    """
    if noise.sigma_map is None:
        return noise
    return replace(noise, sigma=float(np.median(noise.sigma_map[mask])))


def _reach(
    name: str,
    mask: Mask,
    stack: EchoStack,
    noise: NoiseLevel,
    fit: DecayFit,
    rules: RegionRules,
) -> tuple[UpperLimit, JointFit | None]:
    """How far the region can be measured: by its voxels, or by all of them in one fit."""
    reach = upper_limit(name, mask, stack, noise, fit, voxel_relative_se=rules.voxel_relative_se)
    if not reach.is_too_coarse:
        return reach, None
    joint = fit_jointly(
        mask, stack, noise, fit, level=rules.interval, relative_se=rules.voxel_relative_se
    )
    if joint is None:
        told = {"snr": f"{reach.s0 / noise.sigma:.1f}"}
        told["relative"] = f"{100 * rules.voxel_relative_se:g}"
        raise StudyRefused(Finding.of("signal-too-low", region=name, **told))
    found = Finding.of(
        "measured-jointly", region=name, snr=f"{joint.s0 / noise.sigma:.1f}",
        best=f"{100 * joint.best:.0f}", n=joint.n_voxels,
    )  # fmt: skip
    together = UpperLimit(
        r2star_per_s=joint.limit_per_s, s0=joint.s0, best=joint.best, findings=(found,)
    )
    return together, joint


def _decay(
    mask: Mask,
    used: Mask,
    stack: EchoStack,
    noise: NoiseLevel,
    r2star: R2StarSummary,
    s0: float,
    check: DecayCheck,
) -> RegionDecay:
    """Signal against echo time; of all voxels where none could be used."""
    signal = stack.magnitude[used if used.any() else mask]
    low, middle, high = np.percentile(signal, (25, 50, 75), axis=0)
    times = np.linspace(0.0, float(stack.echo_times_ms[-1]) * 1.05, _CURVE_POINTS)
    a = amplitude(s0, r2star.value, times) / noise.sigma
    return RegionDecay(
        echo_times_ms=stack.echo_times_ms,
        signal=middle,
        signal_low=low,
        signal_high=high,
        curve_times_ms=times,
        curve=noise.sigma * expected_magnitude(a, noise.n_channels),
        noise_floor=noise.sigma * noise_floor(noise.n_channels),
        residual=check.residual,
        residual_se=check.residual_se,
    )
