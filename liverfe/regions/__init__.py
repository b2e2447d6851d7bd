"""Outlines + maps -> `RegionSummary`: placement, trimming, censoring, intervals, doubts."""

from liverfe.regions.correlation import WHITE, NoiseCorrelation, effective_count
from liverfe.regions.joint import JointFit, fit_jointly
from liverfe.regions.placement import body_mask, place
from liverfe.regions.precision import MedianPrecision, median_precision
from liverfe.regions.summarise import summarise_region
from liverfe.regions.summary import (
    Qualifier,
    R2StarSummary,
    RegionDecay,
    RegionSummary,
    ReportableLimits,
)
from liverfe.regions.surroundings import correlation_around
from liverfe.regions.value import RegionRules

__all__ = [
    "WHITE",
    "JointFit",
    "MedianPrecision",
    "NoiseCorrelation",
    "Qualifier",
    "R2StarSummary",
    "RegionDecay",
    "RegionRules",
    "RegionSummary",
    "ReportableLimits",
    "body_mask",
    "correlation_around",
    "effective_count",
    "fit_jointly",
    "median_precision",
    "place",
    "summarise_region",
]
