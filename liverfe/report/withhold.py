"""Without names: a result whose texts from outside have been searched for its patient.

With the identity ``key`` no field that names a person is shown. But whoever drew a region, named a
file or filled in a header by hand may have typed the name there too.
"""

from __future__ import annotations

import re
from dataclasses import replace

from liverfe.echoes import EchoStack, naming_pattern
from liverfe.errors import Finding
from liverfe.study import RegionResult, StudyResult
from liverfe.wording import REPORT

__all__ = ["without_person"]


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
    if stack is None:
        return result
    # Of a patient that the files call synthetic the single parts may stay: the name is nobody's.
    pattern = naming_pattern(stack.subject, single_parts=not stack.acquisition.is_synthetic)
    if pattern is None:
        return result

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
