"""The table of findings: each doubt that liverfe can raise, with level, cause, effect and remedy.

One file for each part of the journey; this front door merges them and refuses a code written
twice. `docs/reference/findings.md` is generated from here.
"""

from liverfe.wording.findings._acquire import ACQUIRE_FINDINGS
from liverfe.wording.findings._calibration import CALIBRATION_FINDINGS
from liverfe.wording.findings._entry import FindingWording, Level
from liverfe.wording.findings._journey import JOURNEY_FINDINGS
from liverfe.wording.findings._model import DOUBT_PHRASES, MODEL_FINDINGS
from liverfe.wording.findings._noise import NOISE_FINDINGS
from liverfe.wording.findings._regions import REGION_FINDINGS

_PARTS = (
    ACQUIRE_FINDINGS,
    NOISE_FINDINGS,
    MODEL_FINDINGS,
    REGION_FINDINGS,
    CALIBRATION_FINDINGS,
    JOURNEY_FINDINGS,
)

FINDING_TABLE: dict[str, FindingWording] = {
    code: entry for part in _PARTS for code, entry in part.items()
}
"""Every finding by its code."""

if len(FINDING_TABLE) != sum(len(part) for part in _PARTS):  # pragma: no cover
    raise AssertionError("a finding code is written in two files of liverfe.wording.findings")

__all__ = ["DOUBT_PHRASES", "FINDING_TABLE", "FindingWording", "Level"]
