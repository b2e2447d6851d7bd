"""Page 1 of the report as data: what it says, in which words, in which order.

Nothing is computed here but the published test-retest figure at this study's value: each number is
read from the `StudyResult` and written once by `liverfe.wording.shown`.
"""

from __future__ import annotations

from typing import Any

from liverfe.calibration import IronEstimate, band_set
from liverfe.regions import R2StarSummary
from liverfe.report.phrases import (
    all_findings,
    interval_text,
    percent,
    qualified,
    region_name,
    region_shown,
)
from liverfe.report.repeatability import PUBLISHED_REPEATABILITY
from liverfe.study import RegionResult, StudyResult
from liverfe.units import t2star_ms_from_r2star_per_s
from liverfe.wording import FINDING_TABLE, REPORT, REPORT_PLURALS, shown

__all__ = ["answer", "key_facts", "refusal"]

_CAUTIONS_ON_PAGE_1 = 4
"""More would push the pictures off the page; the rest is counted and stands on page 2."""

_CAUTIONS_WITH_REMEDY = 2
"""Of more than this many the remedies stand on page 2 alone, for the same reason."""

_STOPS_SHOWN = 5
"""A refusal is one page."""


def refusal(result: StudyResult) -> list[dict[str, str]]:
    """Say of each stop finding what was found, why it matters and what to do."""
    stops = [finding for finding in all_findings(result) if finding.level == "stop"]
    return [
        {
            "text": finding.text,
            "effect": FINDING_TABLE[finding.code].effect,
            "remedy": finding.remedy,
            "code": finding.code,
        }
        for finding in stops[:_STOPS_SHOWN]
    ]


def answer(result: StudyResult) -> dict[str, Any]:
    """Give the answer of page 1: LIC or why there is none, band, verdict, how sure.

    Parameters
    ----------
    result : StudyResult
        A reported one.

    Returns
    -------
    dict
        For the template: only text, lists of text, and None where a part does not apply.
    """
    region = region_shown(result)
    iron = region.iron if region else None
    cautions = [f for f in all_findings(result) if f.level == "caution"]
    one, many = REPORT_PLURALS["cautions"]
    more = len(cautions) - _CAUTIONS_ON_PAGE_1
    return {
        "region": REPORT["region"].format(name=region_name(region.summary)) if region else None,
        "lic": _lic(iron, result) if iron else None,
        "no_lic_why": None if iron else _why_no_lic(result),
        "r2star": _r2star_line(region.summary.r2star) if region else None,
        "band": _band(iron) if iron else None,
        "verdict": (
            REPORT["verdict_clear"]
            if not cautions
            else (one if len(cautions) == 1 else many).format(count=len(cautions))
        ),
        "cautions": [
            {"text": f.text, "remedy": f.remedy if len(cautions) <= _CAUTIONS_WITH_REMEDY else ""}
            for f in cautions[:_CAUTIONS_ON_PAGE_1]
        ],
        "more_cautions": REPORT["more_cautions"].format(count=more) if more > 0 else None,
        "how_sure": _how_sure(region, result) if region and iron else [],
    }


def _lic(iron: IronEstimate, result: StudyResult) -> dict[str, str | None]:
    low, high = iron.low_mg_per_g, iron.high_mg_per_g
    if low is None and high is None:
        wording = "interval_none"
    elif high is None:
        wording = "interval_from"
    elif low is None:
        wording = "interval_to"
    else:
        same = shown(low, "lic_mg_per_g") == shown(high, "lic_mg_per_g")
        wording = "interval_narrow" if same else "interval"
    return {
        "value": qualified(iron.value_mg_per_g, "lic_mg_per_g", iron.qualifier),
        "umol": REPORT["umol"].format(
            value=qualified(iron.value_umol_per_g, "lic_umol_per_g", iron.qualifier)
        ),
        "interval": REPORT[wording].format(
            level=percent(result.method.interval),
            low=shown(low, "lic_mg_per_g"),
            high=shown(high, "lic_mg_per_g"),
        ),
        "censored": {">": REPORT["over_limit"], "<": REPORT["under_limit"]}.get(iron.qualifier),
        "curve": _curve_line(result),
    }


def _curve_line(result: StudyResult) -> str:
    """Name the curve beside its number, and how far its equation is known."""
    curve = result.curve
    if curve is None:
        return ""
    line = REPORT["curve_line"].format(key=curve.key, field=f"{curve.field_strength_t:g}")
    return f"{line}: {REPORT[f'evidence_{curve.evidence}']}"


def _why_no_lic(result: StudyResult) -> str:
    field = result.stack.acquisition.field_strength_t if result.stack else None
    if not result.regions:
        return REPORT["why_no_region"]
    if field is None:
        return REPORT["why_no_field"]
    if result.curve is None:
        return REPORT["why_no_curve"].format(field=f"{field:.4g}")
    if result.headline_region is None:
        return REPORT["why_no_liver"]
    return REPORT["why_policy"]


def _r2star_line(r2star: R2StarSummary) -> str:
    value = qualified(r2star.value, "r2star_per_s", r2star.qualifier)
    if r2star.qualifier != "=":
        return REPORT["r2star_limit_line"].format(value=value)
    interval = interval_text(r2star.low, r2star.high, "r2star_per_s")
    return REPORT["r2star_line"].format(value=value, interval=interval)


def _band(iron: IronEstimate) -> dict[str, Any]:
    """Name the band with its thresholds, and lay out the whole set with this band marked."""
    bands = band_set(iron.band_set).bands
    steps = [
        {
            "name": band.name,
            "from": _threshold(band.low_mg_per_g),
            "here": band == iron.band,
        }
        for band in bands
    ]
    named = REPORT["band_set"].format(band_set=iron.band_set)
    if iron.band is None:
        why = REPORT["band_open_why"]
        return {"name": REPORT["band_open"], "range": why, "set": named, "steps": steps}
    low, high = iron.band.low_mg_per_g, iron.band.high_mg_per_g
    key = {(True, True): "band_all", (True, False): "band_below", (False, True): "band_above"}.get(
        (low is None, high is None), "band_range"
    )
    return {
        "name": iron.band.name,
        "range": REPORT[key].format(low=_threshold(low), high=_threshold(high)),
        "set": named,
        "steps": steps,
    }


def _threshold(lic_mg_per_g: float | None) -> str:
    """Write a band's threshold as its source does; nothing at an open end."""
    return "" if lic_mg_per_g is None else f"{lic_mg_per_g:g}"


def _how_sure(region: RegionResult, result: StudyResult) -> list[list[str]]:
    """Say what the narrow interval covers, and what a change must exceed to be one."""
    iron = region.iron
    if iron is None:
        return []
    figure = PUBLISHED_REPEATABILITY
    shares = {"same": figure.same_scanner_share, "other": figure.between_scanners_share}
    facts = {name: f"{100 * share:.0f}" for name, share in shares.items()}
    if iron.qualifier == "=" and iron.value_mg_per_g > 0:
        for name, share in shares.items():
            facts[f"{name}_mg"] = shown(share * iron.value_mg_per_g, "lic_change_mg_per_g")
        change = REPORT["change"].format(**facts)
    else:
        change = REPORT["change_no_value"].format(**facts)
    source = REPORT["change_source"].format(
        same_cov=percent(figure.same_scanner_cov),
        other_cov=percent(figure.between_scanners_cov),
        citation=figure.citation,
        evidence=figure.evidence,
    )
    covers = REPORT["covers"]
    if region.other_curves and iron.qualifier == "=":
        values = [other.value_mg_per_g for other in region.other_curves]
        covers += " " + REPORT["other_curves_line"].format(
            low=shown(min(values), "lic_mg_per_g"), high=shown(max(values), "lic_mg_per_g")
        )
    return [[REPORT["covers_label"], covers, ""], [REPORT["change_label"], change, source]]


def key_facts(result: StudyResult) -> list[list[str]]:
    """Give the few numbers that stand beside the decay curve."""
    region, stack, noise = region_shown(result), result.stack, result.noise
    rows: list[list[str]] = []
    if region is not None:
        summary = region.summary
        r2star = summary.r2star
        value = qualified(r2star.value, "r2star_per_s", r2star.qualifier)
        t2star = t2star_ms_from_r2star_per_s(r2star.value)
        opposite = {"=": "=", ">": "<", "<": ">"}[r2star.qualifier]
        rows += [
            [REPORT["r2star"], REPORT["per_second"].format(value=value)],
            [
                REPORT["t2star"],
                REPORT["milliseconds"].format(value=qualified(t2star, "t2star_ms", opposite)),
            ],
            [
                REPORT["voxels_used"],
                REPORT["used_and_over" if summary.n_over_limit else "used_of"].format(
                    used=summary.n_used, total=summary.n_voxels, over=summary.n_over_limit
                ),
            ],
            [
                REPORT["measurable"],
                REPORT["range_per_second"].format(
                    low=shown(summary.limits.low_r2star_per_s, "r2star_per_s"),
                    high=shown(summary.limits.high_r2star_per_s, "r2star_per_s"),
                ),
            ],
        ]
        if region.iron is not None:
            low, high = (shown(lic, "lic_mg_per_g") for lic in region.iron.limits_mg_per_g)
            rows.append(["", REPORT["range_lic"].format(low=low, high=high)])
    if stack is not None:
        times = stack.echo_times_ms
        rows.append(
            [
                REPORT["echoes"],
                REPORT["echoes_text"].format(
                    count=stack.n_echoes, first=f"{times[0]:.4g}", last=f"{times[-1]:.4g}"
                ),
            ]
        )
    if noise is not None:
        rows.append([REPORT["noise"], f"σ = {shown(noise.sigma, 'signal')}"])
    return rows
