"""`CalibrationCurve`: from R2* to LIC at one field strength."""

from __future__ import annotations

from dataclasses import dataclass

from liverfe.calibration.nouns import Evidence, Form


@dataclass(frozen=True, slots=True, kw_only=True)
class CalibrationCurve:
    """One calibration curve, as published.

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
    """

    key: str
    reference_key: str
    citation: str
    field_strength_t: float
    form: Form
    equation: str
    coefficients: tuple[float, float]
    published_unit: str
    evidence: Evidence
    fit_model_of_origin: str
    cohort: str
    valid_r2star_per_s: tuple[float, float] | None
    is_default: bool = False
    is_local: bool = False
