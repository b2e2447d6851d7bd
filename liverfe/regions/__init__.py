"""Outlines + maps -> `RegionSummary`."""

from liverfe.regions.summary import (
    Qualifier,
    R2StarSummary,
    RegionDecay,
    RegionSummary,
    ReportableLimits,
)

__all__ = ["Qualifier", "R2StarSummary", "RegionDecay", "RegionSummary", "ReportableLimits"]
