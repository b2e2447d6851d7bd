"""Every sentence that a reader sees stands here, once.

`caution` holds the words that each page and object with a LIC carries; `findings` the table of
all doubts that liverfe can raise, with cause, effect on LIC and remedy; `report` the words of the
PDF; `digits` how many digits of a number a reader sees.
"""

from liverfe.wording.caution import CAUTION, CAUTION_SHORT
from liverfe.wording.digits import NOT_KNOWN, shown
from liverfe.wording.estimators import ESTIMATOR_REMARKS, ESTIMATOR_WORDS, EstimatorWording
from liverfe.wording.findings import DOUBT_PHRASES, FINDING_TABLE, FindingWording, Level
from liverfe.wording.report import REPORT, REPORT_COLUMNS, REPORT_PLURALS
from liverfe.wording.study import POOLED_LIVER

__all__ = [
    "CAUTION",
    "CAUTION_SHORT",
    "DOUBT_PHRASES",
    "ESTIMATOR_REMARKS",
    "ESTIMATOR_WORDS",
    "FINDING_TABLE",
    "NOT_KNOWN",
    "POOLED_LIVER",
    "REPORT",
    "REPORT_COLUMNS",
    "REPORT_PLURALS",
    "EstimatorWording",
    "FindingWording",
    "Level",
    "shown",
]
