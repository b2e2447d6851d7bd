"""`RegionSummary`: what a region's voxels say together."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from liverfe.errors import Finding

Qualifier = Literal["=", ">", "<"]


@dataclass(frozen=True, slots=True, kw_only=True)
class ReportableLimits:
    """Between which R2* this scan can measure in this region.

    Attributes
    ----------
    low_r2star_per_s, high_r2star_per_s : float
        Lower limit, from the region's own interval; upper limit, where one voxel of the region
        reaches the stated relative standard error. In 1/s.
    s0 : float
        Signal at echo time zero that the upper limit was computed for, signal units.
    sigma : float
        Noise level that it was computed for, signal units.
    """

    low_r2star_per_s: float
    high_r2star_per_s: float
    s0: float
    sigma: float


@dataclass(frozen=True, slots=True, kw_only=True)
class R2StarSummary:
    """R2* of a region, in 1/s.

    Attributes
    ----------
    value : float
        The region's statistic; where censored, the limit.
    statistic : str
        Its name: ``median``, or ``joint`` where all decays were fitted together.
    low, high : float or None
        Interval of the median of these very voxels, the errors of noise and of sigma in it; None on
        the open side of a censored value.
    iqr, mean, sd : float or None
        Spread and mean of the used voxels; None where censored voxels make them unknowable.
    qualifier : {'=', '>', '<'}
        Whether the value is measured, or the limit it lies beyond.
    before_trimming : float or None
        The same statistic before trimming.
    sd_biological : float or None
        Spread of R2* between the voxels that noise does not explain: 0 where noise explains all,
        None where censored voxels make it unknowable.
    """

    value: float
    statistic: str
    low: float | None
    high: float | None
    iqr: float | None
    mean: float | None
    sd: float | None
    qualifier: Qualifier
    before_trimming: float | None
    sd_biological: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RegionDecay:
    """The region's signal against echo time, for the figure and for checks of the model.

    Attributes
    ----------
    echo_times_ms : ndarray of float64, shape (E,)
        Echo times in ms.
    signal, signal_low, signal_high : ndarray of float64, shape (E,)
        Median of the region's used voxels and their quartiles, signal units.
    curve_times_ms, curve : ndarray of float64, shape (C,)
        Expected magnitude (noise floor included) at the region's median R2* and S0.
    noise_floor : float
        Expected magnitude where there is no signal, signal units.
    residual, residual_se : ndarray of float64, shape (E,), or None
        Mean over voxels of signal minus that voxel's own fit, in units of its noise SD, and the
        standard error of that mean; None where no fit leaves any (two echoes, no decay in reach).
    """

    echo_times_ms: NDArray[np.float64]
    signal: NDArray[np.float64]
    signal_low: NDArray[np.float64]
    signal_high: NDArray[np.float64]
    curve_times_ms: NDArray[np.float64]
    curve: NDArray[np.float64]
    noise_floor: float
    residual: NDArray[np.float64] | None = None
    residual_se: NDArray[np.float64] | None = None


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RegionSummary:
    """Statistics of one region.

    Attributes
    ----------
    name, organ, source : str
        As in `Region`.
    mask : ndarray of bool, shape (X, Y, Z)
        Its voxels before trimming.
    used : ndarray of bool, shape (X, Y, Z)
        Measured voxels that stayed after trimming: those behind mean, SD and quartiles.
    over_limit : ndarray of bool, shape (X, Y, Z)
        Its voxels beyond the upper limit, those without signal among them.
    volume_ml : float
        Volume of `mask`, mL.
    n_slices : int
        Slices that it touches.
    n_voxels, n_used, n_over_limit, n_under_limit, n_no_signal, n_failed, n_trimmed : int
        Counts: n_voxels = n_used + n_over_limit + n_under_limit + n_failed + n_trimmed;
        n_no_signal of the n_over_limit had no signal at all.
    r2star : R2StarSummary
        The region's R2*.
    limits : ReportableLimits
        Between which R2* it could be measured.
    decay : RegionDecay
        Signal against echo time.
    median_reduced_chi2 : float or None
        Median misfit of used voxels; None where two echoes leave none.
    findings : tuple of Finding
        Doubts about this region.
    """

    name: str
    organ: str
    source: str
    mask: NDArray[np.bool_]
    used: NDArray[np.bool_]
    over_limit: NDArray[np.bool_]
    volume_ml: float
    n_slices: int
    n_voxels: int
    n_used: int
    n_over_limit: int
    n_under_limit: int
    n_no_signal: int
    n_failed: int
    n_trimmed: int
    r2star: R2StarSummary
    limits: ReportableLimits
    decay: RegionDecay
    median_reduced_chi2: float | None
    findings: tuple[Finding, ...] = ()
