"""From a region's R2* to its liver iron concentration."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from liverfe.calibration.curve import CalibrationCurve
from liverfe.calibration.fields import curves_for_field
from liverfe.calibration.nouns import BandSet, IronEstimate
from liverfe.calibration.published import band_set as find_band_set
from liverfe.errors import Finding
from liverfe.regions import RegionSummary
from liverfe.units import lic_umol_per_g_from_mg_per_g

_SMALLEST_STATED_LIC_MG_PER_G = 0.01
"""Smaller bounds would be printed as zero, and "below 0.00 mg/g" says nothing."""

_LOWEST_NORMAL_LIC_MG_PER_G = 0.6
"""Lower end of normal LIC (olivieri1997, caption of figure 6; abstract): what is still safe to say
of a liver that the curve puts at or below zero with its whole interval."""


def estimate_iron(summary: RegionSummary, curve: CalibrationCurve, band_set: str) -> IronEstimate:
    """Carry a region's R2*, its interval and its limits through a curve.

    The interval covers the measurement alone, not the calibration. The caller decides whether a
    region may have a LIC at all: only liver may.

    A LIC at or below zero cannot be: it is turned into an upper bound. That bound is the LIC of
    the interval's upper end; where the curve puts even that at zero, the LIC of the lower
    reportable limit; where that is no better, the lower end of normal LIC. So the bound is never
    smaller than what the measurement allows, and never zero or negative.

    Parameters
    ----------
    summary : RegionSummary
        Statistics of a liver region.
    curve : CalibrationCurve
        One that holds at the field of the images (`choose_curve`).
    band_set : str
        Key of the band set.

    Returns
    -------
    IronEstimate
        In mg/g and µmol/g dry weight, with band and findings.

    Raises
    ------
    UsageError
        If there is no such band set.
    ValueError
        If the region has no R2*.
    """
    bands = find_band_set(band_set)
    estimate = _convert(summary, curve, bands)
    others = [
        _convert(summary, other, bands) for other in _other_curves(curve, curve.field_strength_t)
    ]
    return replace(
        estimate, findings=(*estimate.findings, *_ambiguous_band(summary.name, estimate, others))
    )


def other_estimates(
    summary: RegionSummary,
    curve: CalibrationCurve,
    band_set: str,
    field_strength_t: float,
    *,
    site_curves: Sequence[CalibrationCurve] = (),
) -> tuple[IronEstimate, ...]:
    """Give the LIC of a region by each other curve of its field, for comparison only.

    Parameters
    ----------
    summary : RegionSummary
        Statistics of a liver region.
    curve : CalibrationCurve
        The curve that applies; it is left out.
    band_set : str
        Key of the band set.
    field_strength_t : float
        Field strength of the images in T.
    site_curves : sequence of CalibrationCurve
        A site's own, for the table beside the published ones.

    Returns
    -------
    tuple of IronEstimate
        One for each; empty where the field has no other curve.

    Raises
    ------
    UsageError
        If there is no such band set.
    ValueError
        If the region has no R2*.
    """
    bands = find_band_set(band_set)
    others = _other_curves(curve, field_strength_t, site_curves)
    return tuple(_convert(summary, other, bands) for other in others)


def lic_map(r2star_per_s: NDArray[np.floating], curve: CalibrationCurve) -> NDArray[np.float32]:
    """Carry an R2* map through a curve, for display.

    Parameters
    ----------
    r2star_per_s : ndarray
        R2* in 1/s, any shape; NaN where it was not measured.
    curve : CalibrationCurve
        One that holds at the field of the images.

    Returns
    -------
    ndarray of float32
        LIC in mg/g dry weight, same shape; NaN stays NaN. Nothing is clamped, so single voxels of
        a liver without iron may lie below zero: cut off, they would make its mean too high.
    """
    return curve.lic_mg_per_g(np.asarray(r2star_per_s)).astype(np.float32)


@dataclass(frozen=True, slots=True)
class _Stated:
    """LIC as it may be stated, mg/g dry weight."""

    value: float
    low: float | None
    high: float | None
    qualifier: Literal["=", ">", "<"]


def _other_curves(
    curve: CalibrationCurve,
    field_strength_t: float,
    site_curves: Sequence[CalibrationCurve] = (),
) -> list[CalibrationCurve]:
    held = curves_for_field(field_strength_t, site_curves=site_curves)
    return [other for other in held if other.key != curve.key]


def _convert(summary: RegionSummary, curve: CalibrationCurve, bands: BandSet) -> IronEstimate:
    r2star = summary.r2star
    if not math.isfinite(r2star.value):
        raise ValueError(f"region {summary.name!r} has no R2* to convert")
    stated = _state(summary, curve)
    return IronEstimate(
        curve_key=curve.key,
        value_mg_per_g=stated.value,
        value_umol_per_g=lic_umol_per_g_from_mg_per_g(stated.value),
        low_mg_per_g=stated.low,
        high_mg_per_g=stated.high,
        qualifier=stated.qualifier,
        limits_mg_per_g=(
            _not_below_zero(curve.lic_mg_per_g(summary.limits.low_r2star_per_s)),
            _not_below_zero(curve.lic_mg_per_g(summary.limits.high_r2star_per_s)),
        ),
        band_set=bands.key,
        band=bands.band_of(stated.value, stated.qualifier),
        findings=(
            *_below_zero(summary, curve),
            *_outside_range(summary, curve),
            *_near_threshold(summary.name, stated, bands),
        ),
    )


def _state(summary: RegionSummary, curve: CalibrationCurve) -> _Stated:
    r2star = summary.r2star
    lic = curve.lic_mg_per_g(r2star.value)
    if r2star.qualifier == ">":
        # At worst "above zero", which is true and says that this scan measured nothing.
        limit = _not_below_zero(lic)
        return _Stated(limit, low=limit, high=None, qualifier=">")
    if r2star.qualifier == "<":
        bound = _upper_bound(lic)
        return _Stated(bound, low=None, high=bound, qualifier="<")
    high = None if r2star.high is None else curve.lic_mg_per_g(r2star.high)
    # Written so that a power curve's NaN, below R2* zero, counts as not above zero.
    if not lic > 0.0:
        at_limit = curve.lic_mg_per_g(summary.limits.low_r2star_per_s)
        bound = _upper_bound(high, at_limit)
        return _Stated(bound, low=None, high=bound, qualifier="<")
    low = None if r2star.low is None else _not_below_zero(curve.lic_mg_per_g(r2star.low))
    return _Stated(lic, low=low, high=high, qualifier="=")


def _upper_bound(*candidates: float | None) -> float:
    """Give the first candidate that can be printed as a bound, else the lower end of normal LIC."""
    return next(
        (c for c in candidates if c is not None and c >= _SMALLEST_STATED_LIC_MG_PER_G),
        _LOWEST_NORMAL_LIC_MG_PER_G,
    )


def _not_below_zero(lic_mg_per_g: float) -> float:
    """Cut an end of an interval at zero: iron below zero cannot be. (NaN counts as below.)"""
    return lic_mg_per_g if lic_mg_per_g > 0.0 else 0.0


def _below_zero(summary: RegionSummary, curve: CalibrationCurve) -> tuple[Finding, ...]:
    r2star = summary.r2star
    lic = curve.lic_mg_per_g(r2star.value)
    if r2star.qualifier != "=" or lic > 0.0:
        return ()
    return (
        Finding.of(
            "lic-not-above-zero",
            region=summary.name,
            r2star=f"{r2star.value:.1f}",
            key=curve.key,
            lic="no" if math.isnan(lic) else f"{lic:.2f}",
        ),
    )


def _outside_range(summary: RegionSummary, curve: CalibrationCurve) -> tuple[Finding, ...]:
    if curve.valid_r2star_per_s is None:
        return ()
    low, high = curve.valid_r2star_per_s
    value, qualifier = summary.r2star.value, summary.r2star.qualifier
    if value > high and qualifier != "<":
        code = "outside-calibrated-range"
    elif value < low and qualifier != ">":
        code = "below-calibrated-range"
    else:
        return ()
    return (
        Finding.of(
            code,
            region=summary.name,
            r2star=f"{value:.1f}",
            key=curve.key,
            low=f"{low:g}",
            high=f"{high:g}",
        ),
    )


def _near_threshold(region: str, stated: _Stated, bands: BandSet) -> tuple[Finding, ...]:
    if stated.qualifier != "=" or stated.low is None or stated.high is None:
        return ()
    held = [t for t in bands.thresholds_mg_per_g if stated.low <= t <= stated.high]
    return tuple(
        Finding.of(
            "near-band-threshold",
            region=region,
            low=f"{stated.low:.2f}",
            high=f"{stated.high:.2f}",
            threshold=f"{threshold:g}",
            bands=bands.key,
        )
        for threshold in held
    )


def _ambiguous_band(
    region: str, estimate: IronEstimate, others: Sequence[IronEstimate]
) -> tuple[Finding, ...]:
    differing = [other for other in others if other.band != estimate.band]
    if not differing:
        return ()
    return (
        Finding.of(
            "band-depends-on-curve",
            region=region,
            key=estimate.curve_key,
            band=_band_text(estimate),
            others=", by ".join(f"{other.curve_key} {_band_text(other)}" for other in differing),
            bands=estimate.band_set,
        ),
    )


def _band_text(estimate: IronEstimate) -> str:
    name = estimate.band.name if estimate.band else "not one band alone"
    sign = "" if estimate.qualifier == "=" else f"{estimate.qualifier} "
    return f"{name} ({sign}{estimate.value_mg_per_g:.2f} mg/g)"
