"""The calibration curves and band sets there are, as one document."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

from liverfe.calibration import BandSet, CalibrationCurve, band_sets, published_curves
from liverfe.journey.choices import read_site_curve

Json = dict[str, Any]


def describe_curves(curve_files: Sequence[Path] = ()) -> Json:
    """Describe all curves and band sets.

    Parameters
    ----------
    curve_files : sequence of Path
        Files of a site's own curves, shown after the published ones.

    Returns
    -------
    dict
        Plain JSON values.

    Raises
    ------
    UsageError
        If a curve file cannot be read or is not possible.
    """
    own = [read_site_curve(path) for path in curve_files]
    return {
        "schema": 1,
        "curves": [_curve(curve) for curve in (*published_curves(), *own)],
        "band_sets": [_band_set(bands) for bands in band_sets()],
    }


def _curve(curve: CalibrationCurve) -> Json:
    valid = curve.valid_r2star_per_s
    return {
        "key": curve.key,
        "citation": curve.citation,
        "field_strength_t": curve.field_strength_t,
        "default": curve.is_default,
        "local": curve.is_local,
        "form": curve.form,
        "equation": curve.equation,
        "coefficients": list(curve.coefficients),
        "published_unit": curve.published_unit,
        "evidence": curve.evidence,
        "evidence_note": curve.evidence_note,
        "fit_model_of_origin": curve.fit_model_of_origin,
        "noise_handling": curve.noise_handling,
        "reference_method": curve.reference_method,
        "cohort": curve.cohort,
        "valid_r2star_per_s": [round(rate, 1) for rate in valid] if valid else None,
        "fingerprint": curve.fingerprint,
    }


def _band_set(bands: BandSet) -> Json:
    return {
        "key": bands.key,
        "citation": bands.citation,
        "evidence": bands.evidence,
        "bands": [
            {
                "name": band.name,
                "low_mg_per_g": band.low_mg_per_g,
                "high_mg_per_g": band.high_mg_per_g,
            }
            for band in bands.bands
        ],
        "threshold_note": bands.threshold_note,
    }
