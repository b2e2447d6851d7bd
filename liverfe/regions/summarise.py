"""`summarise_region`: from a region's voxels to one number with its interval, or a limit."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import (
    DecayFit,
    FitOutcome,
    amplitude,
    expected_magnitude,
    noise_floor,
    r2star_bound_per_s,
    r2star_shift_per_s,
)
from liverfe.noise import NoiseLevel
from liverfe.regions.limits import upper_limit
from liverfe.regions.model_checks import misfit_findings, check_decay
from liverfe.regions.statistics import (
    censored_quantile,
    correlation_inflation,
    median_interval,
    outliers,
)
from liverfe.regions.summary import R2StarSummary, RegionDecay, RegionSummary, ReportableLimits

Mask = NDArray[np.bool_]

_TOLD_CENSORED = 0.05
"""From this share of voxels over the limit on, a reader is told."""
_MEAN_CENSORED = 0.02
"""Up to this share of censored voxels mean and SD of the rest are given."""
_TOLD_FAILED = 0.10
_MOST_FAILED = 0.50
_TOLD_TRIMMED = 0.15
_FEW_VOXELS = 30
"""Fewer usable voxels than this are told."""
_CURVE_POINTS = 120


@dataclass(frozen=True, slots=True, kw_only=True)
class RegionRules:
    """Choices of the method that a region's summary depends on; see `liverfe.study.Method`."""

    voxel_relative_se: float = 0.10
    trim: str = "mad"
    trim_mads: float = 3.0
    interval: float = 0.95
    censored_share: float = 0.5


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class _Counts:
    """A region's voxels, sorted by what may be said of them."""

    measured: Mask
    over: Mask
    under: Mask
    failed: Mask
    no_signal: Mask


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
    name, organ, source : str
        As in `Region`.
    mask : ndarray of bool, shape (X, Y, Z)
        Its voxels, at least one.
    stack, noise, fit
        Images, noise and fits.
    rules : RegionRules
        Choices of the method.
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
    counts = _sort(mask, fit, limit)
    n_voxels, n_failed = int(mask.sum()), int(counts.failed.sum())
    if n_failed > _MOST_FAILED * n_voxels:
        raise StudyRefused(_share_finding("most-failed", name, n_failed, n_voxels))
    trimmed = _trim(fit, counts, rules)
    used = counts.measured & ~trimmed
    r2star, low_limit = _r2star(name, fit, stack, noise, counts, used, limit, s0, rules)
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
    if r2star.qualifier == "=" or stack.n_echoes == 2:
        summary_findings += misfit_findings(
            name, used | counts.over, stack, noise,
            r2star_per_s=r2star.value, s0=s0, median_chi2=median_chi2,
        )  # fmt: skip
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


def _sort(mask: Mask, fit: DecayFit, limit: float) -> _Counts:
    outcome, rate = fit.outcome, fit.r2star_per_s
    converged = mask & (outcome == FitOutcome.CONVERGED)
    beyond = np.zeros_like(mask)
    beyond[converged] = rate[converged] > limit
    no_signal = mask & (outcome == FitOutcome.NO_SIGNAL)
    return _Counts(
        measured=converged & ~beyond,
        over=beyond | no_signal | (mask & (outcome == FitOutcome.AT_UPPER_BOUND)),
        under=mask & (outcome == FitOutcome.AT_LOWER_BOUND),
        failed=mask & np.isin(outcome, (FitOutcome.NOT_CONVERGED, FitOutcome.NOT_FITTED)),
        no_signal=no_signal,
    )


def _sample(fit: DecayFit, measured: Mask, counts: _Counts) -> NDArray[np.float64]:
    """All voxels that say something, ascending, censored ones at infinity."""
    values = np.sort(fit.r2star_per_s[measured].astype(np.float64))
    under, over = int(counts.under.sum()), int(counts.over.sum())
    return np.concatenate([np.full(under, -np.inf), values, np.full(over, np.inf)])


def _trim(fit: DecayFit, counts: _Counts, rules: RegionRules) -> Mask:
    trimmed = np.zeros_like(counts.measured)
    if rules.trim == "none" or not counts.measured.any():
        return trimmed
    rate = fit.r2star_per_s[counts.measured].astype(np.float64)
    censored = _sample(fit, np.zeros_like(counts.measured), counts)
    far = outliers(np.concatenate([rate, censored]), rules.trim_mads)[: len(rate)]
    trimmed[counts.measured] = far
    return trimmed


def _r2star(
    name: str,
    fit: DecayFit,
    stack: EchoStack,
    noise: NoiseLevel,
    counts: _Counts,
    used: Mask,
    limit: float,
    s0: float,
    rules: RegionRules,
) -> tuple[R2StarSummary, float]:
    """The region's R2*, and its lower limit."""
    sample = _sample(fit, used, counts)
    if not len(sample):
        raise StudyRefused(_share_finding("most-failed", name, 1, 1))
    over_share = float(counts.over.sum()) / len(sample)
    before = censored_quantile(_sample(fit, counts.measured, counts), 0.5)
    before_trimming = before if np.isfinite(before) else None
    rate = fit.r2star_per_s[used].astype(np.float64)
    spread = _spread(rate, sample, over_share)
    value = censored_quantile(sample, 0.5)
    if over_share >= rules.censored_share or value == np.inf:
        return (
            R2StarSummary(
                value=limit, statistic="median", low=limit, high=None, qualifier=">",
                before_trimming=None, **spread,
            ),
            0.0,
        )  # fmt: skip
    inflation = correlation_inflation(fit.r2star_per_s, used)
    low, high = median_interval(sample, level=rules.interval, inflation=inflation)
    z = float(ndtri(0.5 + rules.interval / 2.0))
    at = max(value, 0.0) if np.isfinite(value) else 0.0
    shift = z * noise.relative_sd * abs(
        float(r2star_shift_per_s(stack.echo_times_ms, max(at, 1e-3), s0, noise.sigma, n=noise.n_channels))
    )  # fmt: skip
    voxel = float(r2star_bound_per_s(stack.echo_times_ms, at, s0, noise.sigma, n=noise.n_channels))
    # No region's median is known better than noise alone allows.
    least = z * 1.2533 * voxel / np.sqrt(len(sample) / inflation)
    down = max(at - low, least) if np.isfinite(low) else np.inf
    up = max(high - at, least)
    down, up = float(np.hypot(down, shift)), float(np.hypot(up, shift))
    if at - down <= 0.0:
        ceiling = at + up if np.isfinite(up) else limit
        return (
            R2StarSummary(
                value=ceiling, statistic="median", low=None, high=ceiling, qualifier="<",
                before_trimming=before_trimming, **spread,
            ),
            ceiling,
        )  # fmt: skip
    return (
        R2StarSummary(
            value=value, statistic="median", low=at - down,
            high=at + up if np.isfinite(up) and at + up <= limit else None,
            qualifier="=", before_trimming=before_trimming, **spread,
        ),
        down,
    )  # fmt: skip


def _spread(
    rate: NDArray[np.float64], sample: NDArray[np.float64], over_share: float
) -> dict[str, float | None]:
    """Quartile range, mean and SD, each only where censored voxels leave it knowable."""
    quartiles = censored_quantile(sample, 0.25), censored_quantile(sample, 0.75)
    censored_share = 1.0 - len(rate) / len(sample)
    knowable = censored_share <= _MEAN_CENSORED and len(rate) > 1
    return {
        "iqr": quartiles[1] - quartiles[0] if np.isfinite(quartiles).all() else None,
        "mean": float(rate.mean()) if knowable else None,
        "sd": float(rate.std(ddof=1)) if knowable else None,
    }


def _count_findings(
    name: str,
    counts: _Counts,
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
        found.append(
            Finding.of("censored-under-limit", region=name, limit=f"{r2star.value:.1f}")
        )
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
