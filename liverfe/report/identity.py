"""Whose study it is, and what must be read before anything else."""

from __future__ import annotations

from typing import Literal

from liverfe.report.phrases import field_text
from liverfe.report.printable import person_name, shortened
from liverfe.study import StudyLabel, StudyResult
from liverfe.wording import NOT_KNOWN, REPORT

__all__ = ["Identity", "banners", "identity_rows", "running_head"]

Identity = Literal["full", "key"]
"""What the report may carry of a person: names as in the files, or keys alone."""

_LONGEST_TEXT = 100
"""Characters of a name or description on page 1; DICOM's own limit for each is 64."""


def identity_rows(result: StudyResult, label: StudyLabel, identity: Identity) -> list[list[str]]:
    """Tell whose study this is, when and where it was made.

    Parameters
    ----------
    result : StudyResult
        Its stack names patient and scanner.
    label : StudyLabel
        The keys.
    identity : {'full', 'key'}
        With ``key`` nothing from the files that could name a person is shown: no name, ID, birth
        date or sex, and no series description, which is free text.

    Returns
    -------
    list of [str, str]
        Pairs of label and text.
    """
    if result.stack is None:
        # Nothing was read that could be trusted, a name least of all.
        keys = [["patient_key", label.patient_key], ["audit_study", label.key]]
        return [[REPORT[name], key or NOT_KNOWN] for name, key in keys]
    subject, acquisition = result.stack.subject, result.stack.acquisition
    none = REPORT["not_stated"]
    rows: list[list[str]] = []
    if identity == "full":
        name = person_name(subject.patient_name)
        rows.append([REPORT["patient"], name or REPORT["patient_unnamed"]])
        rows.append([REPORT["patient_id"], subject.patient_id or none])
        born = subject.birth_date.isoformat() if subject.birth_date else ""
        born_and_sex = ", ".join(part for part in (born, subject.sex) if part)
        rows.append([REPORT["born"], born_and_sex or none])
    else:
        rows.append([REPORT["patient_key"], label.patient_key or NOT_KNOWN])
    rows.append(
        [REPORT["study_date"], subject.study_date.isoformat() if subject.study_date else none]
    )
    rows.append([REPORT["scanner"], acquisition.scanner or none])
    rows.append([REPORT["field"], field_text(result)])
    if identity == "full" and subject.series_description:
        rows.append([REPORT["series"], subject.series_description])
    return [[name, shortened(text, _LONGEST_TEXT)] for name, text in rows]


def running_head(result: StudyResult, label: StudyLabel, identity: Identity) -> str:
    """Name the study in one line, for the head of each further page."""
    subject = result.stack.subject if result.stack else None
    parts = [label.patient_key]
    if identity == "full" and subject:
        parts = [person_name(subject.patient_name), subject.patient_id]
    if subject and subject.study_date:
        parts.append(subject.study_date.isoformat())
    return shortened(" · ".join(part for part in parts if part), _LONGEST_TEXT)


def banners(result: StudyResult) -> list[str]:
    """Give the lines that must be read before anything else."""
    lines = []
    if result.stack is not None and result.stack.acquisition.is_synthetic:
        lines.append(REPORT["synthetic"])
    if result.curve is not None and result.curve.is_local:
        lines.append(REPORT["local_curve"])
    return lines
