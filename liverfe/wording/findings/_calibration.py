"""Findings of the calibration part of the journey."""

from liverfe.wording.findings._entry import FindingWording

CALIBRATION_FINDINGS: dict[str, FindingWording] = {
}
