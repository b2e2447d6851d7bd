"""Every sentence that a reader sees stands here, once.

`caution` holds the words that each page and object with a LIC carries; `findings` the table of
all doubts that liverfe can raise, with cause, effect on LIC and remedy; `report` the words of the
PDF; `digits` how many digits of a number a reader sees.
"""

from liverfe.wording.caution import CAUTION, CAUTION_SHORT
from liverfe.wording.digits import NOT_KNOWN, shown
from liverfe.wording.findings import FINDING_TABLE, FindingWording, Level
from liverfe.wording.report import REPORT, REPORT_COLUMNS, REPORT_PLURALS
from liverfe.wording.study import ESTIMATOR_REMARKS, POOLED_LIVER

__all__ = [
    "CAUTION",
    "CAUTION_SHORT",
    "ESTIMATOR_REMARKS",
    "FINDING_TABLE",
    "NOT_KNOWN",
    "POOLED_LIVER",
    "REPORT",
    "REPORT_COLUMNS",
    "REPORT_PLURALS",
    "FindingWording",
    "Level",
    "shown",
]
