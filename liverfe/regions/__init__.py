"""Outlines + maps -> `RegionSummary`: placement, trimming, censoring, intervals, doubts."""

from liverfe.regions.placement import body_mask, place
from liverfe.regions.summarise import summarise_region
from liverfe.regions.summary import (
    Qualifier,
    R2StarSummary,
    RegionDecay,
    RegionSummary,
    ReportableLimits,
)
from liverfe.regions.value import RegionRules

__all__ = [
    "Qualifier",
    "R2StarSummary",
    "RegionDecay",
    "RegionRules",
    "RegionSummary",
    "ReportableLimits",
    "body_mask",
    "place",
    "summarise_region",
]
