"""Which of the stacks that an input holds is measured, and what it goes by."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from liverfe.acquire import StackPlan, Survey
from liverfe.errors import Finding, UsageError
from liverfe.journey.keys import key_of
from liverfe.study import StudyLabel
from liverfe.wording.command_line import STACK_UNKNOWN
from liverfe.wording.journey import (
    FILE_WORD,
    LEFT_OUT_IN_LIST,
    NOTHING_LEFT_OUT,
    STACK_IN_LIST,
)

HOLES = "holes-in-echo-table"
"""Code of the finding that says so."""


@dataclass(frozen=True, slots=True, kw_only=True)
class StackChoice:
    """The stack to measure, or why there is none.

    Attributes
    ----------
    plan : StackPlan or None
        None where the study is refused already.
    holed : StackPlan or None
        Where nothing is usable: the one plan of which only some images are missing. It may still
        serve regions that lie on its complete slices.
    plans : tuple of StackPlan
        All plans that the outcome speaks of: the chosen one, or all that were refused.
    label : StudyLabel
        Its keys.
    findings : tuple of Finding
        Where there is no plan, the reasons, of level ``stop``; else empty.
    """

    plan: StackPlan | None
    holed: StackPlan | None = None
    plans: tuple[StackPlan, ...]
    label: StudyLabel
    findings: tuple[Finding, ...]


def choose_stack(
    survey: Survey, *, number: int | None, inputs: Sequence[Path], secret: bytes
) -> StackChoice:
    """Choose the stack to measure.

    Parameters
    ----------
    survey : Survey
        What the input holds.
    number : int or None
        1-based, among the usable stacks; None: the only one.
    inputs : sequence of Path
        What was surveyed: stands for the study where no file names one.
    secret : bytes
        For the keys.

    Returns
    -------
    StackChoice
        A plan, or findings.

    Raises
    ------
    UsageError
        If there is no usable stack of that number, though there are others.
    """
    usable = survey.usable
    if not usable:
        return _refuse(survey, inputs=inputs, secret=secret)
    if number is None and len(usable) > 1:
        listed = "; ".join(_in_list(i, plan) for i, plan in enumerate(usable, start=1))
        return StackChoice(
            plan=None,
            plans=usable,
            label=label_of(survey, usable[0], secret, inputs=inputs),
            findings=(Finding.of("several-stacks", count=len(usable), stacks=listed),),
        )
    if number is not None and number > len(usable):
        raise UsageError(STACK_UNKNOWN.format(number=number, count=len(usable)))
    plan = usable[(number or 1) - 1]
    return StackChoice(
        plan=plan, plans=(plan,), label=label_of(survey, plan, secret, inputs=inputs), findings=()
    )


def label_of(
    survey: Survey, plan: StackPlan, secret: bytes, *, inputs: Sequence[Path]
) -> StudyLabel:
    """Give the keys of a plan.

    Parameters
    ----------
    survey : Survey
        The survey that it comes from.
    plan : StackPlan
        One of its stacks.
    secret : bytes
        For the keys.
    inputs : sequence of Path
        What was surveyed: its path stands for a study whose files name none.

    Returns
    -------
    StudyLabel
        The study key ends in ``-2``, ``-3`` for further usable stacks of one study.
    """
    of_this_study = [p for p in survey.usable if p.subject.study_uid == plan.subject.study_uid]
    position = next((i for i, p in enumerate(of_this_study, start=1) if p is plan), 1)
    key = key_of(plan.subject.study_uid or str(inputs[0].resolve()), secret)
    return StudyLabel(
        key=key if position == 1 else f"{key}-{position}",
        patient_key=key_of(plan.subject.patient_id, secret),
    )


def _refuse(survey: Survey, *, inputs: Sequence[Path], secret: bytes) -> StackChoice:
    """Gather why nothing is usable; a study that no file names goes by the path of its input."""
    # NIfTI files that lie beside DICOM images are exports of them, most likely, and not the study.
    plans = [plan for plan in survey.stacks if plan.origin == "dicom"] or list(survey.stacks)
    stops = [f for plan in plans for f in plan.findings]
    stops += list(survey.findings)
    if not any(finding.level == "stop" for finding in stops):
        stops.append(no_stack(survey))
    first = plans[0].subject if plans else None
    stands_for_study = (first.study_uid if first else "") or str(inputs[0].resolve())
    holed = [plan for plan in plans if _has_only_holes(plan)]
    return StackChoice(
        plan=None,
        holed=holed[0] if len(holed) == 1 else None,
        plans=tuple(plans),
        label=StudyLabel(
            key=key_of(stands_for_study, secret),
            patient_key=key_of(first.patient_id, secret) if first else "",
        ),
        findings=tuple(dict.fromkeys(stops)),
    )


def no_stack(survey: Survey) -> Finding:
    """Say that there is nothing to measure, and what there was instead."""
    listed = [
        LEFT_OUT_IN_LIST.format(
            what=left.what, n_files=left.n_files, files=FILE_WORD[left.n_files == 1], why=left.why
        )
        for left in survey.left_out
    ]
    return Finding.of("no-stack", left_out="; ".join(listed) or NOTHING_LEFT_OUT)


def plan_files(plan: StackPlan) -> tuple[Path, ...]:
    """List the files that loading a plan reads: its images, and the sidecars that speak of them."""
    paths = {source.path for source in plan.sources}
    for part in plan.parts:
        paths.update(getattr(part, "sidecars", ()))
    return tuple(sorted(paths))


def _has_only_holes(plan: StackPlan) -> bool:
    stops = {finding.code for finding in plan.findings if finding.level == "stop"}
    return stops == {HOLES} and bool(plan.present.all(axis=0).any())


def _in_list(number: int, plan: StackPlan) -> str:
    times = plan.echo_times_ms
    return STACK_IN_LIST.format(
        number=number,
        n_echoes=len(times),
        first=times[0],
        last=times[-1],
        n_slices=plan.present.shape[1],
        layout=plan.layout,
    )
