"""Numbers and choices that several parts of the report word alike."""

from __future__ import annotations

from liverfe.errors import Finding
from liverfe.regions import RegionSummary
from liverfe.report.printable import shortened
from liverfe.study import RegionResult, StudyResult
from liverfe.wording import NOT_KNOWN, REPORT, shown

__all__ = [
    "all_findings",
    "field_text",
    "interval_text",
    "percent",
    "qualified",
    "region_name",
    "region_shown",
]

_LONGEST_REGION_NAME = 60

_LEVELS = ("stop", "caution", "note")


def all_findings(result: StudyResult) -> tuple[Finding, ...]:
    """Gather every finding of a result, each once, gravest first.

    Parameters
    ----------
    result : StudyResult
        Its own findings, and those of its regions and iron estimates, should one of them not
        have been passed on: a caution must never get lost on its way to page 1. What several
        regions share is told once in the result, so a code that is told there is not repeated.

    Returns
    -------
    tuple of Finding
        In the order of the result within each level.
    """
    told = {finding.code for finding in result.findings}
    own: list[Finding] = []
    for region in result.regions:
        own += region.summary.findings
        own += region.iron.findings if region.iron is not None else ()
    once = dict.fromkeys([*result.findings, *(f for f in own if f.code not in told)])
    return tuple(sorted(once, key=lambda finding: _LEVELS.index(finding.level)))


def region_shown(result: StudyResult) -> RegionResult | None:
    """Give the region that page 1 shows: the headline, else the first, else None."""
    return result.headline_region or next(iter(result.regions), None)


def region_name(summary: RegionSummary) -> str:
    """Give a region's name, cut where it is longer than any line has room for."""
    return shortened(summary.name, _LONGEST_REGION_NAME)


def qualified(value: float | None, quantity: str, qualifier: str) -> str:
    """Write a number with ``>`` or ``<`` before it where it is a limit."""
    text = shown(value, quantity)
    return text if qualifier == "=" or text == NOT_KNOWN else f"{qualifier} {text}"


def interval_text(low: float | None, high: float | None, quantity: str) -> str:
    """Write an interval as ``low to high``, an open side as ``>`` or ``<``."""
    if low is None and high is None:
        return NOT_KNOWN
    if high is None:
        return f"> {shown(low, quantity)}"
    if low is None:
        return f"< {shown(high, quantity)}"
    return f"{shown(low, quantity)} to {shown(high, quantity)}"


def percent(share: float) -> str:
    """Write a share as a percentage, without sign."""
    return f"{100 * share:.3g}"


def field_text(result: StudyResult) -> str:
    """Write the settled field strength, or that the files do not state one."""
    field = result.stack.acquisition.field_strength_t if result.stack else None
    return REPORT["tesla"].format(field=f"{field:.4g}") if field else REPORT["not_stated"]
