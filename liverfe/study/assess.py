"""`assess_study`: the whole science, from a stack and regions to a result."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from liverfe.calibration import (
    CalibrationCurve,
    choose_curve,
    estimate_iron,
    fit_model_findings,
    lic_map,
    other_estimates,
)
from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import DecayFit, estimator_named, fit_r2star
from liverfe.maps import judge, repaint
from liverfe.noise import NoiseLevel, estimate_noise
from liverfe.outlines import Region, is_whole_liver
from liverfe.regions import RegionRules, RegionSummary, body_mask, place, summarise_region
from liverfe.study.decay_likelihood import decay_likelihood
from liverfe.study.method import Method
from liverfe.study.noise_doubts import noise_findings, refuse_unbounded
from liverfe.study.result import RegionResult, StudyResult
from liverfe.study.shared_doubts import region_findings
from liverfe.wording import ESTIMATOR_REMARKS, POOLED_LIVER

_NEGATIVE_SHARE = 0.01
"""Interpolation leaves a few values below zero; phase, real or imaginary images have far more."""

_ORDER = {"stop": 0, "caution": 1, "note": 2}


def assess_study(
    stack: EchoStack,
    regions: Sequence[Region],
    method: Method,
    *,
    site_curves: Sequence[CalibrationCurve] = (),
) -> StudyResult:
    """Measure R2* and LIC of a study.

    The science in order: noise, fit, maps; each region placed, trimmed and censored; the curve of
    the field; LIC of the liver regions; the headline.

    Parameters
    ----------
    stack : EchoStack
        The images, at least two echoes.
    regions : sequence of Region
        As drawn; none gives maps and no LIC.
    method : Method
        Every choice that can move a number.
    site_curves : sequence of CalibrationCurve
        A site's own curves, for ``method.curve``.

    Returns
    -------
    StudyResult
        With outcome ``reported``.

    Raises
    ------
    StudyRefused
        Where nothing can be trusted; see the stop findings in `liverfe.wording`.
    """
    _refuse_not_magnitude(stack)
    curve, curve_findings = choose_curve(
        stack.acquisition.field_strength_t,
        method.curve,
        site_curves=site_curves,
        imaging_frequency_mhz=stack.acquisition.imaging_frequency_mhz,
    )
    noise = estimate_noise(
        stack, method=method.noise, sigma=method.sigma, n_channels=method.n_channels,
        likelihood=decay_likelihood,
    )  # fmt: skip
    fit = fit_r2star(stack, noise, model=method.estimator)
    maps = judge(fit, stack, noise, voxel_relative_se=method.voxel_relative_se)
    summaries = _summarise(stack, regions, method, noise, fit, curve)
    refuse_unbounded(summaries, stack, noise)
    for summary in summaries:
        maps = repaint(
            maps, fit, stack, mask=summary.mask, over_limit=summary.over_limit,
            measured=summary.used,
        )  # fmt: skip
    results = tuple(_with_iron(s, curve, method) for s in summaries)
    headline = _headline(summaries)
    findings = (
        *stack.findings,
        *noise.findings,
        *_study_findings(stack, summaries, headline, method, noise),
        *curve_findings,
        *(fit_model_findings(curve, method.estimator) if curve else ()),
        *region_findings(summaries, headline),
        *(finding for r in results if r.iron for finding in r.iron.findings),
    )
    return StudyResult(
        outcome="reported",
        findings=_in_order(findings),
        method=method,
        stack=stack,
        noise=noise,
        maps=maps,
        lic_mg_per_g=lic_map(maps.r2star_per_s, curve) if curve else None,
        curve=curve,
        regions=results,
        headline=headline,
    )


def refused_result(
    findings: Sequence[Finding], method: Method, *, stack: EchoStack | None = None
) -> StudyResult:
    """Make the result of a refused study: findings and no number.

    Parameters
    ----------
    findings : sequence of Finding
        At least one of level ``stop``.
    method : Method
        What would have been done.
    stack : EchoStack or None
        The images as far as they were read.

    Returns
    -------
    StudyResult
        With outcome ``refused``.
    """
    known = (*(stack.findings if stack else ()), *findings)
    return StudyResult(outcome="refused", findings=_in_order(known), method=method, stack=stack)


def _refuse_not_magnitude(stack: EchoStack) -> None:
    negative = float((stack.magnitude < 0).mean())
    if negative > _NEGATIVE_SHARE:
        raise StudyRefused(Finding.of("signal-negative", share=f"{100 * negative:.2g}"))


def _summarise(
    stack: EchoStack,
    regions: Sequence[Region],
    method: Method,
    noise: NoiseLevel,
    fit: DecayFit,
    curve: CalibrationCurve | None,
) -> tuple[RegionSummary, ...]:
    """All regions, and the pooled liver regions where no single one is the liver's."""
    rules = RegionRules(
        voxel_relative_se=method.voxel_relative_se,
        trim=method.trim,
        trim_mads=method.trim_mads,
        interval=method.interval,
        censored_share=method.censored_share,
    )
    lic = curve.lic_mg_per_g if curve else None
    body = body_mask(fit) if regions else np.zeros(stack.grid.shape, dtype=bool)
    placed = [(region, *place(region, stack, body)) for region in regions]
    findings = {region.name: found for region, _, found in placed}
    for (one, mask, _), (other, other_mask, _) in combinations(placed, 2):
        shared = int((mask & other_mask).sum())
        if shared:
            findings[one.name] += (
                Finding.of("regions-overlap", first=one.name, second=other.name, n=shared),
            )
    summaries = [
        summarise_region(
            region.name, region.organ, mask, stack, noise, fit, rules,
            source=region.source, findings=findings[region.name], lic_mg_per_g=lic,
        )
        for region, mask, _ in placed
    ]  # fmt: skip
    liver = [s for s in summaries if s.organ == "liver"]
    if len(liver) > 1 and not any(is_whole_liver(s.name) for s in liver):
        union: NDArray[np.bool_] = np.logical_or.reduce([s.mask for s in liver])
        summaries.append(
            summarise_region(
                POOLED_LIVER, "liver", union, stack, noise, fit, rules,
                source="pooled", lic_mg_per_g=lic,
            )
        )  # fmt: skip
    return tuple(summaries)


def _headline(summaries: Sequence[RegionSummary]) -> str | None:
    """The whole liver, else the pooled or only liver region."""
    liver = [s.name for s in summaries if s.organ == "liver"]
    whole = [name for name in liver if is_whole_liver(name)]
    return whole[0] if whole else liver[-1] if liver else None


def _with_iron(
    summary: RegionSummary,
    curve: CalibrationCurve | None,
    method: Method,
) -> RegionResult:
    if curve is None or summary.organ != "liver":
        return RegionResult(summary=summary, iron=None)
    return RegionResult(
        summary=summary,
        iron=estimate_iron(summary, curve, method.bands),
        other_curves=other_estimates(summary, curve, method.bands, curve.field_strength_t),
    )


def _study_findings(
    stack: EchoStack,
    summaries: Sequence[RegionSummary],
    headline: str | None,
    method: Method,
    noise: NoiseLevel,
) -> tuple[Finding, ...]:
    found: list[Finding] = []
    if not summaries:
        found.append(Finding.of("no-region"))
    elif headline is None:
        found.append(Finding.of("no-liver-region"))
    if not estimator_named(method.estimator).is_for_reports:
        found.append(
            Finding.of(
                "estimator-for-comparison",
                estimator=method.estimator,
                why=ESTIMATOR_REMARKS[method.estimator],
            )
        )
    for summary in summaries:
        if summary.name == headline:
            found.extend(noise_findings(summary, stack, noise))
    return tuple(found)


def _in_order(findings: Sequence[Finding]) -> tuple[Finding, ...]:
    """Each finding once, gravest first, otherwise as they were raised."""
    once = list(dict.fromkeys(findings))
    return tuple(sorted(once, key=lambda finding: _ORDER[finding.level]))
