"""Findings of the journey part of the journey."""

from liverfe.wording.findings._entry import FindingWording

JOURNEY_FINDINGS: dict[str, FindingWording] = {
}
