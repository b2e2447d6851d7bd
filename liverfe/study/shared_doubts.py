"""One cause, one finding: what several regions show alike is told once."""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence

from liverfe.errors import Finding
from liverfe.regions import RegionSummary
from liverfe.wording import DOUBT_PHRASES, FINDING_TABLE

_OF_THE_SCAN = frozenset(DOUBT_PHRASES) & frozenset(FINDING_TABLE)
"""Doubts about the decay: motion, fat, a gradient and the like, which pass over organs."""


def region_findings(
    summaries: Sequence[RegionSummary], headline: str | None
) -> tuple[Finding, ...]:
    """Gather the findings of all regions.

    A doubt about the decay that several regions share is told for the headline region, else for
    the first that has it, and names the others; each region keeps its own in its summary.

    Parameters
    ----------
    summaries : sequence of RegionSummary
        All regions.
    headline : str or None
        Name of the region that page 1 shows.

    Returns
    -------
    tuple of Finding
        In the order of the regions, the headline first.
    """
    told: list[Finding] = []
    place: dict[str, int] = {}
    others: dict[str, list[str]] = {}
    for summary in sorted(summaries, key=lambda summary: summary.name != headline):
        for finding in summary.findings:
            if finding.code not in _OF_THE_SCAN:
                told.append(finding)
            elif finding.code not in place:
                place[finding.code] = len(told)
                told.append(finding)
            else:
                others.setdefault(finding.code, []).append(summary.name)
    for code, names in others.items():
        also = DOUBT_PHRASES["also-elsewhere"].format(regions=", ".join(names))
        at = place[code]
        told[at] = dataclasses.replace(told[at], text=f"{told[at].text} {also}")
    return tuple(told)
