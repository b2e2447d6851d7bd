"""`CalibrationCurve`: from R2* to LIC at one field strength."""

from __future__ import annotations

import hashlib
import json
import math
from dataclasses import dataclass
from typing import Literal, overload

import numpy as np
from numpy.typing import NDArray

from liverfe.calibration.nouns import Evidence, Form
from liverfe.units import (
    mg_per_g_from_umol_per_g,
    r2star_per_s_from_t2star_ms,
    t2star_ms_from_r2star_per_s,
)

NoiseHandling = Literal["corrected", "offset", "truncation", "unknown"]
PublishedUnit = Literal["mg/g", "umol/g"]

_MG_PER_G: dict[str, float] = {"mg/g": 1.0, "umol/g": mg_per_g_from_umol_per_g(1.0)}
"""LIC of 1 in each unit in which a curve may be published, in mg/g."""

_FINGERPRINT_DIGITS = 12


@dataclass(frozen=True, slots=True, kw_only=True)
class CalibrationCurve:
    """One calibration curve, as published. LIC rises with R2*, else it is refused.

    Attributes
    ----------
    key : str
        Its name in commands and results, for example ``hernando2023_1p5``.
    reference_key : str
        Its paper in `liverfe.sources`; empty for a site's own.
    citation : str
        The paper in one line.
    field_strength_t : float
        The field it holds for: part of the key.
    form : {'linear', 'power'}
        LIC = slope * R2* + intercept, or LIC = factor * T2*(ms) ** exponent (as published).
    equation : str
        The equation as published, for the report.
    coefficients : tuple of float
        (slope, intercept) or (factor, exponent), in the published unit.
    published_unit : {'mg/g', 'umol/g'}
        Unit of the LIC that the published equation gives.
    evidence : str
        How the equation is known: abstract, secondary, memory; local for a site's own.
    fit_model_of_origin : str
        Which fit the paper's R2* came from.
    cohort : str
        Whom it was made with.
    valid_r2star_per_s : tuple of float or None
        R2* range studied; None where it is not established.
    is_default : bool
        Whether it is the default of its field.
    is_local : bool
        A site's own curve, marked LOCAL wherever it shows.
    evidence_note : str
        `evidence` in full: which part is known how.
    noise_handling : {'corrected', 'offset', 'truncation', 'unknown'}
        How the fit of origin treated the noise floor.
    reference_method : str
        What LIC was measured with.
    example : tuple of float or None
        Worked example: R2* in 1/s and the LIC in mg/g that the curve must give for it.
    """

    key: str
    reference_key: str
    citation: str
    field_strength_t: float
    form: Form
    equation: str
    coefficients: tuple[float, float]
    published_unit: PublishedUnit
    evidence: Evidence
    fit_model_of_origin: str
    cohort: str
    valid_r2star_per_s: tuple[float, float] | None
    is_default: bool = False
    is_local: bool = False
    evidence_note: str = ""
    noise_handling: NoiseHandling = "unknown"
    reference_method: str = ""
    example: tuple[float, float] | None = None

    def __post_init__(self) -> None:
        if self.form not in ("linear", "power"):
            raise ValueError(f"form is {self.form!r}, wanted 'linear' or 'power'")
        if self.published_unit not in _MG_PER_G:
            raise ValueError(f"unit is {self.published_unit!r}, wanted 'mg/g' or 'umol/g'")
        if not (math.isfinite(self.field_strength_t) and self.field_strength_t > 0):
            raise ValueError(
                f"field strength is {self.field_strength_t} T, wanted a positive number"
            )
        first, second = self.coefficients
        if not (math.isfinite(first) and math.isfinite(second)):
            raise ValueError("coefficients must be finite numbers")
        if first <= 0 or (self.form == "power" and second >= 0):
            raise ValueError("LIC must rise with R2*: check the signs of the coefficients")
        if self.valid_r2star_per_s is not None:
            low, high = self.valid_r2star_per_s
            if not 0 <= low < high < math.inf:
                raise ValueError(f"R2* range is {low} to {high} 1/s, wanted an ascending pair")

    @overload
    def lic_mg_per_g(self, r2star_per_s: float) -> float: ...
    @overload
    def lic_mg_per_g(self, r2star_per_s: NDArray[np.floating]) -> NDArray[np.float64]: ...
    def lic_mg_per_g(
        self, r2star_per_s: float | NDArray[np.floating]
    ) -> float | NDArray[np.float64]:
        """Convert R2* to LIC by the published arithmetic, then the unit.

        Nothing is clamped: a linear curve gives a negative LIC below its zero. What a reader is
        told there is `estimate_iron`'s affair.

        Parameters
        ----------
        r2star_per_s : float or ndarray
            R2* in 1/s; NaN stays NaN.

        Returns
        -------
        float or ndarray of float64
            LIC in mg/g dry weight, same shape. A power curve has no LIC for a negative R2* (NaN),
            and its limit, zero, at R2* zero.
        """
        r2star = np.asarray(r2star_per_s, dtype=np.float64)
        first, second = self.coefficients
        if self.form == "linear":
            published = first * r2star + second
        else:
            # T2* of a vanishing R2* may overflow to infinity: its LIC is zero, as it should be.
            with np.errstate(over="ignore"):
                t2star_ms = t2star_ms_from_r2star_per_s(r2star)
            published = np.where(r2star == 0.0, 0.0, first * t2star_ms**second)
        lic = published * _MG_PER_G[self.published_unit]
        return lic if isinstance(r2star_per_s, np.ndarray) else float(lic)

    def r2star_per_s(self, lic_mg_per_g: float) -> float:
        """Give the R2* at which the curve reaches a LIC: the inverse of `lic_mg_per_g`.

        Parameters
        ----------
        lic_mg_per_g : float
            LIC in mg/g dry weight.

        Returns
        -------
        float
            R2* in 1/s; NaN where a power curve never reaches the LIC.
        """
        first, second = self.coefficients
        published = lic_mg_per_g / _MG_PER_G[self.published_unit]
        if self.form == "linear":
            return (published - second) / first
        if published == 0.0:
            return 0.0
        if not published > 0.0:
            return math.nan
        return r2star_per_s_from_t2star_ms((published / first) ** (1.0 / second))

    @property
    def fingerprint(self) -> str:
        """Twelve hex digits of a hash over all that moves a number: an edited curve shows."""
        moves = [
            self.key,
            self.field_strength_t,
            self.form,
            *self.coefficients,
            self.published_unit,
        ]
        digest = hashlib.sha256(json.dumps(moves, separators=(",", ":")).encode()).hexdigest()
        return digest[:_FINGERPRINT_DIGITS]
