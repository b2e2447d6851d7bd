"""Findings of reading: what files say, lack or contradict; one file for each kind."""

from liverfe.wording.findings._acquire_files import FILE_FINDINGS
from liverfe.wording.findings._acquire_places import PLACE_FINDINGS
from liverfe.wording.findings._acquire_statements import STATEMENT_FINDINGS
from liverfe.wording.findings._acquire_values import VALUE_FINDINGS
from liverfe.wording.findings._entry import FindingWording

ACQUIRE_FINDINGS: dict[str, FindingWording] = {
    **STATEMENT_FINDINGS,
    **PLACE_FINDINGS,
    **VALUE_FINDINGS,
    **FILE_FINDINGS,
}
