"""Without names: a result whose texts from outside have been searched for its patient.

With the identity ``key`` no field that names a person is shown. But whoever drew a region, named a
file or filled in a header by hand may have typed the name there too.
"""

from __future__ import annotations

import re
from dataclasses import replace

from liverfe.echoes import EchoStack, Subject
from liverfe.errors import Finding
from liverfe.study import RegionResult, StudyResult
from liverfe.wording import REPORT

__all__ = ["without_person"]

_SHORTEST_WORD = 3
"""Parts of a name shorter than this (initials, particles) name nobody when they stand alone."""

_SHORTEST_NUMBER = 4
"""A patient ID shorter than this cannot be told from a count or an echo time."""


def without_person(result: StudyResult) -> StudyResult:
    """Take the patient out of every text of a result that came from outside.

    Parameters
    ----------
    result : StudyResult
        Whose stack names the patient.

    Returns
    -------
    StudyResult
        The same numbers; name, each of its parts, ID, study UID and birth date replaced wherever a
        region's name, a finding, the scanner's label or a list of left-out files holds them. Of a
        patient that the files call synthetic the parts may stay: the name is nobody's.
    """
    stack = result.stack
    terms = _terms(stack.subject, stack.acquisition.is_synthetic) if stack else []
    if stack is None or not terms:
        return result
    pattern = re.compile("|".join(terms), re.IGNORECASE)

    def clean(text: str) -> str:
        return pattern.sub(REPORT["withheld"], text)

    def clean_findings(findings: tuple[Finding, ...]) -> tuple[Finding, ...]:
        return tuple(replace(f, text=clean(f.text), remedy=clean(f.remedy)) for f in findings)

    def clean_region(region: RegionResult) -> RegionResult:
        summary = region.summary
        iron = region.iron
        return replace(
            region,
            summary=replace(
                summary, name=clean(summary.name), findings=clean_findings(summary.findings)
            ),
            iron=replace(iron, findings=clean_findings(iron.findings)) if iron else None,
        )

    return replace(
        result,
        findings=clean_findings(result.findings),
        stack=_clean_stack(stack, pattern),
        regions=tuple(clean_region(region) for region in result.regions),
        headline=None if result.headline is None else clean(result.headline),
    )


def _clean_stack(stack: EchoStack, pattern: re.Pattern[str]) -> EchoStack:
    withheld = REPORT["withheld"]
    acquisition = stack.acquisition
    return replace(
        stack,
        acquisition=replace(
            acquisition,
            scanner=pattern.sub(withheld, acquisition.scanner),
            contrast_agent=pattern.sub(withheld, acquisition.contrast_agent),
        ),
        layout=pattern.sub(withheld, stack.layout),
        left_out=tuple(
            replace(
                left, what=pattern.sub(withheld, left.what), why=pattern.sub(withheld, left.why)
            )
            for left in stack.left_out
        ),
    )


def _terms(subject: Subject, is_synthetic: bool) -> list[str]:
    """Patterns of everything that names the subject, longest first."""
    # DICOM parts a name's components by ^ and its representations by =.
    parts = [part for part in re.split(r"[\^=\s,]+", subject.patient_name) if part]
    terms = [rf"{re.escape(a)}[\W_]{{1,3}}{re.escape(b)}" for a in parts for b in parts if a != b]
    if not is_synthetic:
        # A word of an ideographic script is shorter, yet as distinct.
        terms += [re.escape(p) for p in parts if len(p) >= _SHORTEST_WORD - (not p.isascii())]
    terms += [
        re.escape(number)
        for number in (subject.patient_id.strip(), subject.study_uid.strip())
        if len(number) >= _SHORTEST_NUMBER
    ]
    if subject.birth_date is not None:
        year, month, day = f"{subject.birth_date:%Y %m %d}".split()
        terms += [rf"{a}[-./]?{month}[-./]?{b}" for a, b in ((year, day), (day, year))]
    free = (rf"(?<![^\W_]){term}(?![^\W_])" for term in terms)
    return sorted(free, key=len, reverse=True)
