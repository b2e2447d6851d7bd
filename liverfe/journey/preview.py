"""What headers alone promise: for `liverfe inspect`, and for a batch's dry run.

Nothing is written, not even the secret: where there is none yet, studies have no key to show.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

from liverfe.acquire import StackPlan, Survey, find_stacks
from liverfe.calibration import CalibrationCurve, choose_curve
from liverfe.echoes import LeftOut
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import reportable_range
from liverfe.journey.keys import key_of, peek_secret
from liverfe.journey.progress import Progress, no_progress
from liverfe.journey.stack_choice import no_stack
from liverfe.study import Method
from liverfe.wording.command_line import VERDICT

SNR_SHOWN = (20.0, 50.0, 100.0)
"""SNR (S0 over sigma) for which the range to expect is shown."""

Json = dict[str, Any]


def inspect_inputs(
    inputs: Sequence[Path],
    *,
    method: Method | None = None,
    site_curves: Sequence[CalibrationCurve] = (),
    echo_times_ms: Sequence[float] | None = None,
    field_strength_t: float | None = None,
    progress: Progress = no_progress,
) -> Json:
    """Tell from headers what a run would find.

    Parameters
    ----------
    inputs : sequence of Path
        Files and folders.
    method : Method, optional
        The house's by default.
    site_curves : sequence of CalibrationCurve
        A site's own curves.
    echo_times_ms : sequence of float, optional
        For files that state none.
    field_strength_t : float, optional
        For files that state none.
    progress : Progress
        Listener.

    Returns
    -------
    dict
        Plain JSON values: verdict and reason, stacks, what was left out, findings.
    """
    survey = find_stacks(
        inputs,
        echo_times_ms=echo_times_ms,
        field_strength_t=field_strength_t,
        progress=lambda done, total: progress("survey", done, total),
    )
    return {
        "schema": 1,
        "verdict": survey.verdict,
        "reason": verdict_sentence(survey),
        "stacks": preview_stacks(survey, method=method or Method(), site_curves=site_curves),
        "left_out": [_left_out(left) for left in survey.left_out],
        "findings": [finding_document(finding) for finding in survey.findings],
    }


def preview_stacks(
    survey: Survey, *, method: Method, site_curves: Sequence[CalibrationCurve]
) -> list[Json]:
    """Describe every stack of a survey.

    Parameters
    ----------
    survey : Survey
        From `liverfe.acquire.find_stacks`.
    method : Method
        Whose curve and relative bound apply.
    site_curves : sequence of CalibrationCurve
        A site's own curves.

    Returns
    -------
    list of dict
        Usable stacks with their numbers first, in the survey's order.
    """
    secret = peek_secret()
    numbers = {id(plan): number for number, plan in enumerate(survey.usable, start=1)}
    return [
        {
            "number": numbers.get(id(plan)),
            "study_key": key_of(plan.subject.study_uid, secret) if secret else None,
            **_plan_document(plan, method, site_curves),
        }
        for plan in survey.stacks
    ]


def verdict_sentence(survey: Survey) -> str:
    """Give the verdict in words, with the one reason where it is not `usable`."""
    stops = [plan.refusal for plan in survey.stacks if plan.refusal is not None]
    stops += [finding for finding in survey.findings if finding.level == "stop"]
    first = stops[0] if stops else no_stack(survey)
    reason = f"{first.text} {first.remedy}"
    return VERDICT[survey.verdict].format(reason=reason)


def finding_document(finding: Finding) -> Json:
    """Write down a finding as JSON values."""
    return {
        "code": finding.code,
        "level": finding.level,
        "text": finding.text,
        "remedy": finding.remedy,
    }


def completeness_picture(plan: StackPlan) -> list[str] | None:
    """Draw the echo x slice table, a line an echo, ``#`` present and ``.`` missing.

    Parameters
    ----------
    plan : StackPlan
        With its table.

    Returns
    -------
    list of str or None
        None where nothing is missing.
    """
    if plan.present.all():
        return None
    return ["".join("#" if there else "." for there in row) for row in plan.present]


def _plan_document(
    plan: StackPlan, method: Method, site_curves: Sequence[CalibrationCurve]
) -> Json:
    curve, doubts = _curve_that_would_apply(plan, method, site_curves)
    n_echoes, n_slices = plan.present.shape
    return {
        "verdict": plan.verdict,
        "layout": plan.layout,
        "n_files": plan.n_files,
        "echo_times_ms": [round(float(time), 4) for time in plan.echo_times_ms],
        "shape": list(plan.shape) if plan.shape else None,
        "n_slices": int(n_slices),
        "n_images": int(plan.present.sum()),
        "n_images_expected": int(n_echoes * n_slices),
        "completeness": completeness_picture(plan),
        "field_strength_t": plan.acquisition.field_strength_t,
        "curve": _curve_document(curve) if curve else None,
        "reportable": _ranges(plan, method, curve) if plan.refusal is None else [],
        "left_out": [_left_out(left) for left in plan.left_out],
        "findings": [finding_document(finding) for finding in (*plan.findings, *doubts)],
    }


def _curve_that_would_apply(
    plan: StackPlan, method: Method, site_curves: Sequence[CalibrationCurve]
) -> tuple[CalibrationCurve | None, tuple[Finding, ...]]:
    how = plan.acquisition
    try:
        return choose_curve(
            how.field_strength_t,
            method.curve,
            site_curves=site_curves,
            imaging_frequency_mhz=how.imaging_frequency_mhz,
        )
    except StudyRefused as refusal:
        return None, refusal.findings


def _curve_document(curve: CalibrationCurve) -> Json:
    return {
        "key": curve.key,
        "citation": curve.citation,
        "evidence": curve.evidence,
        "local": curve.is_local,
    }


def _ranges(plan: StackPlan, method: Method, curve: CalibrationCurve | None) -> list[Json]:
    ranges = []
    for snr in SNR_SHOWN:
        found = reportable_range(plan.echo_times_ms, snr, relative=method.voxel_relative_se)
        lic = [max(0.0, curve.lic_mg_per_g(rate)) for rate in found] if curve and found else None
        ranges.append(
            {
                "snr": snr,
                "r2star_per_s": [round(rate, 1) for rate in found] if found else None,
                "lic_mg_per_g": [round(value, 2) for value in lic] if lic else None,
            }
        )
    return ranges


def _left_out(left: LeftOut) -> Json:
    return {"what": left.what, "n_files": left.n_files, "why": left.why}
