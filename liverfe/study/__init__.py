"""Stack + regions + `Method` -> `StudyResult`: the whole science in one readable function."""

from liverfe.study.method import ESTIMATORS, Method
from liverfe.study.result import RegionResult, StudyLabel, StudyResult

__all__ = ["ESTIMATORS", "Method", "RegionResult", "StudyLabel", "StudyResult"]
