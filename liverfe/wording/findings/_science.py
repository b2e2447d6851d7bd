"""Findings of the science part of the journey."""

from liverfe.wording.findings._entry import FindingWording

SCIENCE_FINDINGS: dict[str, FindingWording] = {
}
