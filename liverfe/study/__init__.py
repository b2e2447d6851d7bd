"""Stack + regions + `Method` -> `StudyResult`: the whole science in one readable function."""

from liverfe.fit import ESTIMATORS
from liverfe.study.assess import assess_study, refused_result
from liverfe.study.method import Method
from liverfe.study.result import RegionResult, StudyLabel, StudyResult

__all__ = [
    "ESTIMATORS",
    "Method",
    "RegionResult",
    "StudyLabel",
    "StudyResult",
    "assess_study",
    "refused_result",
]
