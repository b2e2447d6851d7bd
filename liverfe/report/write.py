"""`write_report`: one study's result, as the page that a reporting radiologist reads."""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping
from typing import Any

from liverfe.report.answer import answer, key_facts, refusal
from liverfe.report.details import audit, details
from liverfe.report.figures import Figure, draw_figures
from liverfe.report.identity import Identity, banners, identity_rows, running_head
from liverfe.report.typeset import typeset
from liverfe.report.withhold import without_person
from liverfe.study import StudyLabel, StudyResult
from liverfe.wording import CAUTION, REPORT, REPORT_COLUMNS

__all__ = ["write_report"]

_NO_DATE = dt.date(1970, 1, 1)
"""Date of the document where neither caller nor files give one: fixed, plainly not a study's."""


def write_report(
    result: StudyResult,
    *,
    label: StudyLabel,
    document: bytes,
    software: Mapping[str, str],
    identity: Identity = "full",
    created: dt.date | None = None,
    n_input_files: int | None = None,
) -> bytes:
    """Write the PDF report of one study.

    Page 1 answers; further pages hold what stands behind the answer. A refused study gets one
    page that says what was found, why it matters and what to do. The file is PDF/A-3a and
    PDF/UA-1, holds `document` as an attachment, and is the same bytes for the same input.

    Parameters
    ----------
    result : StudyResult
        Where every number comes from.
    label : StudyLabel
        Keys of study and patient.
    document : bytes
        The study's ``result.json``, UTF-8; attached unchanged, its hash printed.
    software : mapping
        Version by name, for the audit block.
    identity : {'full', 'key'}
        Whether the patient is named as in the files, or by key alone: then texts from outside
        (names of regions, say) are searched for the patient as well.
    created : date or None
        Date of the document; None: the study's.
    n_input_files : int or None
        How many files were read, for the audit block.

    Returns
    -------
    bytes
        The PDF.

    Raises
    ------
    ValueError
        If `document` is not UTF-8.
    """
    if identity == "key":
        result = without_person(result)
    subject = result.stack.subject if result.stack else None
    day = created or (subject.study_date if subject else None) or _NO_DATE
    figures = draw_figures(result) if result.outcome == "reported" else {}
    facts = {
        "words": REPORT,
        "columns": {name: list(columns) for name, columns in REPORT_COLUMNS.items()},
        "caution": CAUTION,
        "key": label.key,
        "head": running_head(result, label, identity),
        "banners": banners(result),
        "identity": identity_rows(result, label, identity),
        "audit": audit(
            result, label, document=document, software=software, n_input_files=n_input_files
        ),
        **_body(result, figures),
    }
    drawings = {name: figure.svg for name, figure in figures.items()}
    return typeset(facts, drawings=drawings, document=document, day=day)


def _body(result: StudyResult, figures: Mapping[str, Figure]) -> dict[str, Any]:
    if result.outcome == "refused":
        return {"refused": refusal(result)}
    return {
        "answer": answer(result),
        "key_facts": key_facts(result),
        "figures": {
            name: {"caption": figure.caption, "alt": figure.alt} for name, figure in figures.items()
        },
        **details(result),
    }
