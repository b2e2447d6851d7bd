"""Region summaries with R2* of one's choice, for what a curve makes of them."""

from __future__ import annotations

import numpy as np

from liverfe.regions import (
    Qualifier,
    R2StarSummary,
    RegionDecay,
    RegionSummary,
    ReportableLimits,
)

_MASK = np.ones((2, 2, 1), dtype=bool)
_ECHOES = np.array([1.0, 2.0, 3.0])


def region_of(
    value: float,
    low: float | None = None,
    high: float | None = None,
    qualifier: Qualifier = "=",
    *,
    limits: tuple[float, float] = (0.0, 1130.0),
) -> RegionSummary:
    """Make a region called ``liver`` with this R2* (1/s), interval, qualifier and limits."""
    return RegionSummary(
        name="liver",
        organ="liver",
        source="test",
        mask=_MASK,
        used=_MASK,
        over_limit=~_MASK,
        volume_ml=1.0,
        n_slices=1,
        n_voxels=4,
        n_used=4,
        n_over_limit=0,
        n_under_limit=0,
        n_no_signal=0,
        n_failed=0,
        n_trimmed=0,
        r2star=R2StarSummary(
            value=value,
            statistic="median",
            low=low,
            high=high,
            iqr=None,
            mean=None,
            sd=None,
            qualifier=qualifier,
            before_trimming=None,
        ),
        limits=ReportableLimits(
            low_r2star_per_s=limits[0], high_r2star_per_s=limits[1], s0=100.0, sigma=2.0
        ),
        decay=RegionDecay(
            echo_times_ms=_ECHOES,
            signal=_ECHOES,
            signal_low=_ECHOES,
            signal_high=_ECHOES,
            curve_times_ms=_ECHOES,
            curve=_ECHOES,
            noise_floor=2.5,
        ),
        median_reduced_chi2=None,
    )
