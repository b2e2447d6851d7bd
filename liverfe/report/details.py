"""Page 2 and further pages as data: everything that stands behind the answer."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from typing import Any

from liverfe.calibration import CalibrationCurve, IronEstimate, published_curves
from liverfe.report.phrases import (
    all_findings,
    interval_text,
    percent,
    qualified,
    region_name,
    region_shown,
)
from liverfe.study import RegionResult, StudyLabel, StudyResult
from liverfe.wording import FINDING_TABLE, NOT_KNOWN, REPORT, shown

__all__ = ["audit", "details"]


def details(result: StudyResult) -> dict[str, Any]:
    """Give regions, limits, method, findings, curves and what was not measured.

    Parameters
    ----------
    result : StudyResult
        A reported one.

    Returns
    -------
    dict
        For the template: text and rows of text.
    """
    level = percent(result.method.interval)
    region = region_shown(result)
    return {
        "regions": [_region_row(entry) for entry in result.regions],
        "regions_note": REPORT["regions_note"].format(level=level),
        "limits": _limits(region, result) if region else None,
        "method": _method(result),
        "findings": _findings(result),
        "others": _curve_rows(region, result.curve) if region and region.iron else [],
        "calibration": _calibration(result.curve, result) if result.curve else [],
        "not_measured": _not_measured(result),
    }


def _region_row(region: RegionResult) -> list[str]:
    summary, r2star, iron = region.summary, region.summary.r2star, region.iron
    return [
        region_name(summary),
        summary.organ,
        REPORT["used_of"].format(used=summary.n_used, total=summary.n_voxels),
        _with_interval(
            qualified(r2star.value, "r2star_per_s", r2star.qualifier),
            interval_text(r2star.low, r2star.high, "r2star_per_s"),
        ),
        shown(r2star.iqr, "r2star_per_s"),
        _lic_with_interval(iron) if iron else NOT_KNOWN,
        f"{summary.n_over_limit}",
        f"{summary.n_failed}",
        f"{summary.n_trimmed}",
        shown(r2star.before_trimming, "r2star_per_s"),
    ]


def _with_interval(value: str, interval: str) -> str:
    return value if interval == NOT_KNOWN else f"{value} ({interval})"


def _lic_with_interval(iron: IronEstimate) -> str:
    return _with_interval(
        qualified(iron.value_mg_per_g, "lic_mg_per_g", iron.qualifier),
        interval_text(iron.low_mg_per_g, iron.high_mg_per_g, "lic_mg_per_g"),
    )


def _limits(region: RegionResult, result: StudyResult) -> str:
    limits = region.summary.limits
    lic = ""
    if region.iron is not None:
        low, high = (shown(value, "lic_mg_per_g") for value in region.iron.limits_mg_per_g)
        lic = REPORT["limits_lic"].format(low=low, high=high)
    text = REPORT["limits_text"].format(
        name=region_name(region.summary),
        low=shown(limits.low_r2star_per_s, "r2star_per_s"),
        high=shown(limits.high_r2star_per_s, "r2star_per_s"),
        lic=lic,
        s0=shown(limits.s0, "signal"),
        sigma=shown(limits.sigma, "signal"),
        share=percent(result.method.voxel_relative_se),
    )
    return " ".join([text, *_spread(region)])


def _spread(region: RegionResult) -> list[str]:
    """Spread of R2* beyond noise, where it is known."""
    sd = region.summary.r2star.sd_biological
    if sd is None:
        return []
    if sd == 0.0:
        return [REPORT["spread_of_noise"]]
    return [REPORT["spread_beyond_noise"].format(sd=shown(sd, "r2star_per_s"))]


def _method(result: StudyResult) -> list[str]:
    method, noise = result.method, result.noise
    region = region_shown(result)
    trim = REPORT[f"trim_{method.trim}"].format(mads=f"{method.trim_mads:g}")
    lines = [
        REPORT["method_fit"].format(estimator=method.estimator),
        REPORT["method_region"].format(
            trim=trim,
            statistic=region.summary.r2star.statistic if region else NOT_KNOWN,
            level=percent(method.interval),
        ),
        REPORT["method_limit"].format(
            share=percent(method.voxel_relative_se), censored=percent(method.censored_share)
        ),
    ]
    if noise is not None:
        channels = REPORT["channels_one" if noise.n_channels == 1 else "channels_many"]
        lines[0] += " " + REPORT["method_noise"].format(
            sigma=shown(noise.sigma, "signal"),
            channels=channels.format(count=noise.n_channels),
            how=REPORT.get(f"noise_{noise.method}", noise.method),
            relative=percent(noise.relative_sd),
        )
    return lines


def _findings(result: StudyResult) -> list[list[str]]:
    return [
        [
            REPORT[f"level_{finding.level}"],
            finding.code,
            finding.text,
            _effect(finding.code),
            finding.remedy,
        ]
        for finding in all_findings(result)
    ]


def _effect(code: str) -> str:
    effect = FINDING_TABLE[code].effect
    return "" if effect == "None." else REPORT["effect"].format(effect=effect)


def _curve_rows(region: RegionResult, curve: CalibrationCurve | None) -> list[list[str]]:
    known = {published.key: published for published in published_curves()}
    if curve is not None:
        known[curve.key] = curve
    own = [region.iron] if region.iron is not None else []
    return [
        [
            iron.curve_key,
            _lic_with_interval(iron),
            iron.band.name if iron.band else REPORT["band_open"],
            known[iron.curve_key].citation if iron.curve_key in known else NOT_KNOWN,
            known[iron.curve_key].evidence if iron.curve_key in known else NOT_KNOWN,
        ]
        for iron in [*own, *region.other_curves]
    ]


def _calibration(curve: CalibrationCurve, result: StudyResult) -> list[list[str]]:
    valid = curve.valid_r2star_per_s
    rows = [
        ["calibration_key", f"{curve.key} ({curve.field_strength_t:g} T)"],
        ["equation", curve.equation],
        ["citation", curve.citation],
        ["evidence", f"{curve.evidence}: {REPORT[f'evidence_{curve.evidence}']}"],
        ["cohort", curve.cohort],
        [
            "range",
            REPORT["range_per_second"].format(low=f"{valid[0]:g}", high=f"{valid[1]:g}")
            if valid
            else REPORT["range_unknown"],
        ],
        ["model", curve.fit_model_of_origin],
        ["model_here", REPORT["model_note"].format(estimator=result.method.estimator)],
    ]
    return [[REPORT[key], text or NOT_KNOWN] for key, text in rows]


def _not_measured(result: StudyResult) -> str:
    contrast = result.stack.acquisition.contrast_agent if result.stack else ""
    return REPORT["not_measured_text"].format(contrast=contrast or REPORT["no_contrast"])


def audit(
    result: StudyResult,
    label: StudyLabel,
    *,
    document: bytes,
    software: Mapping[str, str],
    n_input_files: int | None,
) -> list[list[str]]:
    """Give what a reviewer needs years later to find and repeat this result.

    Parameters
    ----------
    result : StudyResult
        Reported or refused.
    label : StudyLabel
        The keys.
    document : bytes
        The attached ``result.json``; its hash is printed.
    software : mapping
        Version by name.
    n_input_files : int or None
        Files that were read; None where it is not known.

    Returns
    -------
    list of [str, str]
        Pairs of label and text.
    """
    stack = result.stack
    rows = [
        [REPORT["audit_study"], label.key],
        [REPORT["audit_patient"], label.patient_key or NOT_KNOWN],
        [REPORT["audit_method"], result.method.id],
        [REPORT["audit_hash"], hashlib.sha256(document).hexdigest()],
        [REPORT["audit_software"], ", ".join(f"{name} {v}" for name, v in software.items())],
        [REPORT["audit_inputs"], NOT_KNOWN if n_input_files is None else f"{n_input_files}"],
    ]
    if stack is not None and stack.layout:
        rows.append([REPORT["audit_layout"], stack.layout])
    if stack is not None and stack.left_out:
        items = (
            REPORT["left_out_item"].format(what=left.what, count=left.n_files, why=left.why)
            for left in stack.left_out
        )
        rows.append([REPORT["audit_left_out"], "; ".join(items)])
    return rows
