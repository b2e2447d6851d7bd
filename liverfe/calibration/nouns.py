"""`CalibrationCurve`, `BandSet` and `IronEstimate`."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from liverfe.errors import Finding

Evidence = Literal["abstract", "secondary", "memory", "local"]
Form = Literal["linear", "power"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Band:
    """One named range of LIC, in mg/g dry weight.

    Attributes
    ----------
    name : str
        As the source words it.
    low_mg_per_g, high_mg_per_g : float or None
        Its thresholds; None at an open end.
    """

    name: str
    low_mg_per_g: float | None
    high_mg_per_g: float | None


@dataclass(frozen=True, slots=True, kw_only=True)
class IronEstimate:
    """Liver iron concentration of a region, dry weight.

    Attributes
    ----------
    curve_key : str
        Key of the calibration curve.
    value_mg_per_g, value_umol_per_g : float
        LIC; where censored, the limit.
    low_mg_per_g, high_mg_per_g : float or None
        The measurement interval carried through the curve: it does not cover the calibration.
    qualifier : {'=', '>', '<'}
        Whether the value is measured, or the limit it lies beyond.
    limits_mg_per_g : tuple of float
        The region's reportable limits carried through the curve.
    band_set : str
        Key of the band set.
    band : Band or None
        The band of the value; None where a censored value could lie in more than one.
    findings : tuple of Finding
        Doubts about the conversion.
    """

    curve_key: str
    value_mg_per_g: float
    value_umol_per_g: float
    low_mg_per_g: float | None
    high_mg_per_g: float | None
    qualifier: Literal["=", ">", "<"]
    limits_mg_per_g: tuple[float, float]
    band_set: str
    band: Band | None
    findings: tuple[Finding, ...] = ()
