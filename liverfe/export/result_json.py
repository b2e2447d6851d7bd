"""`result.json`, schema 1: the one source of every number that leaves.

Everything is read from a `StudyResult`; nothing is computed here. Numbers are rounded once, here,
to six significant digits; what is not finite becomes null. `result.schema.json` beside this file
and `docs/reference/result-json.md` describe each key.
"""

from __future__ import annotations

import json
import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import asdict
from typing import Any

from liverfe.calibration import CalibrationCurve, IronEstimate
from liverfe.echoes import EchoStack
from liverfe.errors import Finding
from liverfe.export.privacy import region_names_withheld, withholder
from liverfe.noise import NoiseLevel
from liverfe.regions import RegionDecay, RegionSummary
from liverfe.study import RegionResult, StudyLabel, StudyResult
from liverfe.units import t2star_ms_from_r2star_per_s
from liverfe.wording import CAUTION

__all__ = ["SCHEMA", "result_document", "rounded", "to_json_bytes"]

SCHEMA = 1
"""Number of the schema; it changes when a key changes its name, type or meaning."""

_SIGNIFICANT_DIGITS = 6
"""Finer than any measurement of ours, coarser than the noise of floating point."""

_COUNTS = (
    "n_slices", "n_voxels", "n_used", "n_over_limit", "n_under_limit", "n_no_signal", "n_failed",
    "n_trimmed",
)  # fmt: skip

Json = dict[str, Any]
Withhold = Callable[[str], str]


def result_document(
    result: StudyResult, *, label: StudyLabel, software: Mapping[str, str]
) -> dict[str, Any]:
    """Write down a result as the document that other programs read.

    Parameters
    ----------
    result : StudyResult
        What the study came to.
    label : StudyLabel
        The keys that it goes by.
    software : mapping of str to str
        Versions: ``liverfe`` first, then Python and libraries.

    Returns
    -------
    dict
        Plain JSON values. All keys of schema 1 are there; of a refused study no R2*, no LIC, no
        noise and no limits, whatever the result still holds.
    """
    is_reported = result.outcome == "reported"
    stack = result.stack
    regions = result.regions if is_reported else ()
    names = region_names_withheld((region.summary.name for region in regions), stack)
    withhold = _withhold_names(withholder(stack), names)
    headline = result.headline_region if is_reported else None
    return {
        "schema": SCHEMA,
        "outcome": result.outcome,
        "findings": [_finding(finding, withhold) for finding in result.findings],
        "study": _study(label, stack, withhold),
        "stack": _stack(stack, withhold) if stack else None,
        "noise": _noise(result.noise) if is_reported and result.noise else None,
        "limits": _limits(headline) if headline else None,
        "calibration": _calibration(result.curve) if is_reported and result.curve else None,
        "headline": names[headline.summary.name] if headline else None,
        "regions": [_region(region, names, withhold) for region in regions],
        "method": {"id": result.method.id, **asdict(result.method)},
        "software": dict(software),
        "caution": CAUTION,
    }


def to_json_bytes(document: Mapping[str, Any]) -> bytes:
    """Turn a document into the bytes of its file.

    Parameters
    ----------
    document : mapping
        Plain JSON values.

    Returns
    -------
    bytes
        UTF-8, indented, keys in the document's order, a line feed at the end: the same document
        gives the same bytes.

    Raises
    ------
    ValueError
        If a number is NaN or infinite: JSON has neither.
    """
    text = json.dumps(document, ensure_ascii=False, allow_nan=False, indent=2)
    return f"{text}\n".encode()


def rounded(value: float | None) -> float | None:
    """Round a number to six significant digits; what is missing or not finite becomes None."""
    if value is None or not math.isfinite(value):
        return None
    return float(f"{value:.{_SIGNIFICANT_DIGITS}g}")


def _rounded_all(values: Sequence[float] | Any) -> list[float | None]:
    return [rounded(float(value)) for value in values]


def _withhold_names(withhold: Withhold, names: Mapping[str, str]) -> Withhold:
    """Also replace region names that were changed, wherever a sentence quotes them."""
    changed = {old: new for old, new in names.items() if old != new}

    def withhold_all(text: str) -> str:
        for old, new in changed.items():
            text = text.replace(old, new)
        return withhold(text)

    return withhold_all


def _finding(finding: Finding, withhold: Withhold) -> Json:
    return {
        "code": finding.code,
        "level": finding.level,
        "text": withhold(finding.text),
        "remedy": withhold(finding.remedy),
    }


def _study(label: StudyLabel, stack: EchoStack | None, withhold: Withhold) -> Json:
    date = stack.subject.study_date if stack else None
    return {
        "key": label.key,
        "patient_key": label.patient_key or None,
        "date": date.isoformat() if date else None,
        "scanner": (withhold(stack.acquisition.scanner) or None) if stack else None,
    }


def _stack(stack: EchoStack, withhold: Withhold) -> Json:
    how = stack.acquisition
    assert stack.present is not None  # filled in at birth
    return {
        "echo_times_ms": _rounded_all(stack.echo_times_ms),
        "shape": list(stack.grid.shape),
        "n_slices": stack.grid.shape[2],
        "field_strength_t": rounded(how.field_strength_t),
        "layout": withhold(stack.layout),
        "left_out": [
            {"what": withhold(left.what), "n_files": int(left.n_files), "why": withhold(left.why)}
            for left in stack.left_out
        ],
        "voxel_size_mm": _rounded_all(stack.grid.voxel_size_mm),
        "slice_thickness_mm": rounded(stack.grid.slice_thickness_mm),
        "n_images": int(stack.present.size),
        "n_images_missing": int((~stack.present).sum()),
        "n_complete_slices": int(stack.complete_slices.sum()),
        "imaging_frequency_mhz": rounded(how.imaging_frequency_mhz),
        "sequence": withhold(how.sequence) or None,
        "repetition_time_ms": rounded(how.repetition_time_ms),
        "flip_angle_deg": rounded(how.flip_angle_deg),
        "acquired_matrix": list(how.acquired_matrix) if how.acquired_matrix else None,
        "contrast_agent": withhold(how.contrast_agent) or None,
        "synthetic": how.is_synthetic,
    }


def _noise(noise: NoiseLevel) -> Json:
    return {
        "sigma": rounded(noise.sigma),
        "n_channels": int(noise.n_channels),
        "channels_between": list(noise.channels_between) if noise.channels_between else None,
        "method": noise.method,
        "relative_sd": rounded(noise.relative_sd),
        "varies": noise.sigma_map is not None,
        "candidates": [
            {
                "method": way.method,
                "sigma": rounded(way.sigma),
                "n_channels": int(way.n_channels),
                "relative_sd": rounded(way.relative_sd),
                "n_voxels": int(way.n_voxels),
                "remark": way.remark,
            }
            for way in noise.candidates
        ],
    }


def _limits(region: RegionResult) -> Json:
    limits = region.summary.limits
    return {
        "r2star_per_s": _rounded_all((limits.low_r2star_per_s, limits.high_r2star_per_s)),
        "lic_mg_per_g": _rounded_all(region.iron.limits_mg_per_g) if region.iron else None,
    }


def _calibration(curve: CalibrationCurve) -> Json:
    valid = curve.valid_r2star_per_s
    return {
        "key": curve.key,
        "citation": curve.citation,
        "form": curve.form,
        "evidence": curve.evidence,
        "valid_r2star_per_s": _rounded_all(valid) if valid else None,
        "equation": curve.equation,
        "field_strength_t": rounded(curve.field_strength_t),
        "fit_model_of_origin": curve.fit_model_of_origin,
        "cohort": curve.cohort,
        "evidence_note": curve.evidence_note,
        "reference_method": curve.reference_method,
        "noise_handling": curve.noise_handling,
        "fingerprint": curve.fingerprint,
        "local": curve.is_local,
    }


def _region(region: RegionResult, names: Mapping[str, str], withhold: Withhold) -> Json:
    summary, iron = region.summary, region.iron
    return {
        "name": names[summary.name],
        "organ": summary.organ,
        "volume_ml": rounded(summary.volume_ml),
        **{count: int(getattr(summary, count)) for count in _COUNTS},
        "r2star_per_s": _r2star(summary),
        "t2star_ms": rounded(t2star_ms_from_r2star_per_s(summary.r2star.value)),
        # The greater R2*, the shorter T2*: a bare limit must not be read as a value.
        "t2star_qualifier": {"=": "=", ">": "<", "<": ">"}[summary.r2star.qualifier],
        "lic_mg_per_g": _lic(iron) if iron else None,
        "lic_umol_per_g": rounded(iron.value_umol_per_g) if iron else None,
        "band": _band(iron) if iron else None,
        "limits": {
            **_limits(region),
            "s0": rounded(summary.limits.s0),
            "sigma": rounded(summary.limits.sigma),
        },
        "median_reduced_chi2": rounded(summary.median_reduced_chi2),
        "decay": _decay(summary.decay),
        "other_curves": [
            {
                "key": other.curve_key,
                "lic_mg_per_g": _lic(other),
                "lic_umol_per_g": rounded(other.value_umol_per_g),
                "findings": [finding.code for finding in other.findings],
            }
            for other in region.other_curves
        ],
        "findings": [f.code for f in (*summary.findings, *(iron.findings if iron else ()))],
        "source": withhold(summary.source),
    }


def _r2star(summary: RegionSummary) -> Json:
    r2star = summary.r2star
    return {
        "value": rounded(r2star.value),
        "statistic": r2star.statistic,
        "low": rounded(r2star.low),
        "high": rounded(r2star.high),
        "iqr": rounded(r2star.iqr),
        "mean": rounded(r2star.mean),
        "sd": rounded(r2star.sd),
        "sd_biological": rounded(r2star.sd_biological),
        "qualifier": r2star.qualifier,
        "before_trimming": rounded(r2star.before_trimming),
    }


def _lic(iron: IronEstimate) -> Json:
    return {
        "value": rounded(iron.value_mg_per_g),
        "low": rounded(iron.low_mg_per_g),
        "high": rounded(iron.high_mg_per_g),
        "qualifier": iron.qualifier,
        "basis": "dry weight",
    }


def _band(iron: IronEstimate) -> Json | None:
    if iron.band is None:
        return None
    return {
        "set": iron.band_set,
        "name": iron.band.name,
        "low_mg_per_g": rounded(iron.band.low_mg_per_g),
        "high_mg_per_g": rounded(iron.band.high_mg_per_g),
    }


def _decay(decay: RegionDecay) -> Json:
    return {
        "echo_times_ms": _rounded_all(decay.echo_times_ms),
        "signal": _rounded_all(decay.signal),
        "signal_low": _rounded_all(decay.signal_low),
        "signal_high": _rounded_all(decay.signal_high),
        "noise_floor": rounded(decay.noise_floor),
        "residual": None if decay.residual is None else _rounded_all(decay.residual),
        "residual_se": None if decay.residual_se is None else _rounded_all(decay.residual_se),
    }
