"""Summary -> `IronEstimate`: published curves, bands, a site's own curve."""

from liverfe.calibration.curve import CalibrationCurve
from liverfe.calibration.nouns import Band, IronEstimate

__all__ = ["Band", "CalibrationCurve", "IronEstimate"]
