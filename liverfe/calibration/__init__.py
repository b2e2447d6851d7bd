"""Summary -> `IronEstimate`: published curves, bands, a site's own curve."""

from liverfe.calibration.choose import choose_curve, fit_model_findings
from liverfe.calibration.curve import CalibrationCurve
from liverfe.calibration.estimate import estimate_iron, lic_map, other_estimates
from liverfe.calibration.fields import curves_for_field, default_curve, field_key_t, holds_at
from liverfe.calibration.local import site_curve
from liverfe.calibration.nouns import Band, BandSet, IronEstimate
from liverfe.calibration.published import (
    band_set,
    band_sets,
    curve,
    published_curves,
    read_band_sets,
    read_curves,
)

__all__ = [
    "Band",
    "BandSet",
    "CalibrationCurve",
    "IronEstimate",
    "band_set",
    "band_sets",
    "choose_curve",
    "curve",
    "curves_for_field",
    "default_curve",
    "estimate_iron",
    "field_key_t",
    "fit_model_findings",
    "holds_at",
    "lic_map",
    "other_estimates",
    "published_curves",
    "read_band_sets",
    "read_curves",
    "site_curve",
]
