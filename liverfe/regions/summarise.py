"""`summarise_region`: from a region's voxels to one number with its interval, or a limit."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import (
    DecayFit,
    amplitude,
    expected_magnitude,
    noise_floor,
    r2star_bound_per_s,
)
from liverfe.noise import NoiseLevel
from liverfe.regions.counts import VoxelCounts, censored_sample, sort_voxels, trimmed_voxels
from liverfe.regions.limits import upper_limit
from liverfe.regions.model_checks import check_decay, misfit_findings
from liverfe.regions.statistics import censored_quantile
from liverfe.regions.summary import R2StarSummary, RegionDecay, RegionSummary, ReportableLimits
from liverfe.regions.value import RegionRules, region_value

Mask = NDArray[np.bool_]

_TOLD_CENSORED = 0.05
"""From this share of voxels over the limit on, a reader is told."""
_TOLD_FAILED = 0.10
_MOST_FAILED = 0.50
_TOLD_TRIMMED = 0.15
_FEW_VOXELS = 30
"""Fewer usable voxels than this are told."""
_UNEVEN = 0.40
"""Spread of R2* within a region, as a share of its median, from which a reader is told; livers of
one kind spread by 10 to 30 %."""
_TENTHS_APART = 2.563
"""Between the tenth and the ninetieth percentile lie this many SD of a normal distribution."""
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
) -> RegionSummary:
    """Summarise the voxels of a region.

    The value is the median of all voxels that are not outliers, voxels over the limit counting at
    the upper end and voxels under it at the lower: it stands while less than
    ``rules.censored_share`` of them are over the limit, else the region is ``>`` the limit.

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

    Returns
    -------
    RegionSummary
        With counts, value, interval, limits, decay curve and findings.

    Raises
    ------
    StudyRefused
        ``signal-rises``, ``saturated``, ``most-failed``, ``no-tissue-signal``, ``signal-too-low``.
    """
    decay_findings = () if organ == "background" else check_decay(name, mask, stack, noise)
    limit, s0, limit_findings = upper_limit(
        name, mask, stack, noise, fit, voxel_relative_se=rules.voxel_relative_se
    )
    counts = sort_voxels(mask, fit, limit)
    n_voxels, n_failed = int(mask.sum()), int(counts.failed.sum())
    if n_failed > _MOST_FAILED * n_voxels:
        raise StudyRefused(_share_finding("most-failed", name, n_failed, n_voxels))
    mads = rules.trim_mads if rules.trim == "mad" else None
    trimmed = trimmed_voxels(fit, counts, mads=mads)
    used = counts.measured & ~trimmed
    sample = censored_sample(fit, used, counts)
    r2star, low_limit = region_value(
        sample, used, counts, stack, noise, fit, rules, limit=limit, s0=s0
    )
    chi2 = fit.reduced_chi2[used]
    median_chi2 = float(np.median(chi2)) if used.any() and np.isfinite(chi2).all() else None
    if r2star.qualifier == ">" and decay_findings:
        # A decay too fast to see cannot come back at a later echo: the echoes are out of order.
        raise StudyRefused(Finding.of("echoes-out-of-order", region=name), *decay_findings)
    summary_findings = (
        *findings,
        *decay_findings,
        *limit_findings,
        *_count_findings(name, counts, used, trimmed, n_voxels, limit, r2star),
    )
    if r2star.qualifier == "=" and organ == "liver":
        summary_findings += _uneven_iron(name, sample, stack, noise, r2star.value, s0)
    if r2star.qualifier == "=" or stack.n_echoes == 2:
        summary_findings += misfit_findings(
            name, used | counts.over, stack, noise,
            r2star_per_s=r2star.value, s0=s0, median_chi2=median_chi2,
        )  # fmt: skip
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
        decay=_decay(mask, used, stack, noise, r2star, s0),
        median_reduced_chi2=median_chi2,
        findings=summary_findings,
    )


def _count_findings(
    name: str,
    counts: VoxelCounts,
    used: Mask,
    trimmed: Mask,
    n_voxels: int,
    limit: float,
    r2star: R2StarSummary,
) -> tuple[Finding, ...]:
    found = []
    over, failed = int(counts.over.sum()), int(counts.failed.sum())
    if r2star.qualifier == ">" or over > _TOLD_CENSORED * n_voxels:
        consequence = (
            "The value is stated as over the limit."
            if r2star.qualifier == ">"
            else "The median stands, since they are the smaller part."
        )
        found.append(
            Finding.of(
                "censored-over-limit", region=name, share=f"{100 * over / n_voxels:.0f}",
                limit=f"{limit:.0f}", consequence=consequence,
            )
        )  # fmt: skip
    if r2star.qualifier == "<":
        found.append(Finding.of("censored-under-limit", region=name, limit=f"{r2star.value:.1f}"))
    if failed > _TOLD_FAILED * n_voxels:
        found.append(_share_finding("many-failed", name, failed, n_voxels))
    n_trimmed = int(trimmed.sum())
    if n_trimmed > _TOLD_TRIMMED * n_voxels and r2star.before_trimming is not None:
        found.append(
            Finding.of(
                "many-trimmed", region=name, share=f"{100 * n_trimmed / n_voxels:.0f}",
                before=f"{r2star.before_trimming:.4g}", after=f"{r2star.value:.4g}",
            )
        )  # fmt: skip
    said = int(used.sum()) + over + int(counts.under.sum())
    if said < _FEW_VOXELS:
        found.append(Finding.of("few-voxels", region=name, n=said, wanted=_FEW_VOXELS))
    return tuple(found)


def _uneven_iron(
    name: str,
    sample: NDArray[np.float64],
    stack: EchoStack,
    noise: NoiseLevel,
    value: float,
    s0: float,
) -> tuple[Finding, ...]:
    """Tell where voxels differ by far more than noise explains, outliers or not."""
    low, high = censored_quantile(sample, 0.1), censored_quantile(sample, 0.9)
    if not (np.isfinite(low) and np.isfinite(high)):
        return ()  # censored voxels are told already
    bound = float(
        r2star_bound_per_s(stack.echo_times_ms, value, s0, noise.sigma, n=noise.n_channels)
    )
    spread = (high - low) / _TENTHS_APART
    if spread**2 - bound**2 <= (_UNEVEN * value) ** 2:
        return ()
    told = {"low": f"{low:.0f}", "high": f"{high:.0f}", "median": f"{value:.0f}"}
    return (Finding.of("uneven-iron", region=name, **told),)


def _share_finding(code: str, name: str, part: int, whole: int) -> Finding:
    return Finding.of(code, region=name, share=f"{100 * part / whole:.0f}")


def _decay(
    mask: Mask,
    used: Mask,
    stack: EchoStack,
    noise: NoiseLevel,
    r2star: R2StarSummary,
    s0: float,
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
    )
