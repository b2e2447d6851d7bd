"""Which curve applies to a study, and what must be said about it."""

from __future__ import annotations

from collections.abc import Sequence

from liverfe.calibration.curve import CalibrationCurve, NoiseHandling
from liverfe.calibration.fields import (
    curves_for_field,
    default_curve,
    field_key_t,
    holds_at,
)
from liverfe.calibration.lookup import find_by_key
from liverfe.calibration.published import published_curves
from liverfe.errors import Finding, StudyRefused, UsageError
from liverfe.fit import estimator_named
from liverfe.units import field_t_from_frequency_mhz

_LABEL_OF_TWO_FIELDS_T = 3.0
"""What scanners of 2.89 T may state as well."""


def choose_curve(
    field_strength_t: float | None,
    key: str | None = None,
    *,
    site_curves: Sequence[CalibrationCurve] = (),
    imaging_frequency_mhz: float | None = None,
) -> tuple[CalibrationCurve | None, tuple[Finding, ...]]:
    """Choose the calibration curve of a study.

    Parameters
    ----------
    field_strength_t : float or None
        Settled field strength in T (`liverfe.echoes.settle_field_strength`); None: unknown.
    key : str or None
        The curve asked for; None: the default of the field.
    site_curves : sequence of CalibrationCurve
        A site's own (`site_curve`); used only where `key` names one.
    imaging_frequency_mhz : float or None
        As the files state it, in MHz.

    Returns
    -------
    curve : CalibrationCurve or None
        None where no LIC may be stated.
    findings : tuple of Finding
        ``field-unknown``, ``no-curve-for-field``, ``local-curve``, ``local-curve-alone``
        (cautions), ``field-not-confirmed`` (note), or nothing.

    Raises
    ------
    UsageError
        If `key` names no curve, or two of `site_curves` have one key.
    StudyRefused
        If `key` names a curve of another field: ``curve-of-another-field``.
    """
    wanted = None if key is None else _named(key, site_curves)
    if field_strength_t is None:
        return None, (Finding.of("field-unknown"),)
    if wanted is not None and not holds_at(wanted, field_strength_t):
        held = curves_for_field(field_strength_t, site_curves=site_curves)
        raise StudyRefused(
            Finding.of(
                "curve-of-another-field",
                key=wanted.key,
                curve_field=f"{wanted.field_strength_t:g}",
                field=f"{field_strength_t:.4g}",
                held=", ".join(c.key for c in held) or "there is none",
            )
        )
    curve = wanted or default_curve(field_strength_t)
    if curve is None:
        fields = sorted({c.field_strength_t for c in published_curves()})
        return None, (
            Finding.of(
                "no-curve-for-field",
                field=f"{field_strength_t:.4g}",
                fields=", ".join(f"{field:.3g}" for field in fields),
            ),
        )
    return curve, (
        *_doubt_about_field(field_strength_t, imaging_frequency_mhz),
        *_doubts_about_local(curve),
    )


def fit_model_findings(curve: CalibrationCurve, estimator: str) -> tuple[Finding, ...]:
    """Say where curve and fit treat the noise floor differently.

    Parameters
    ----------
    curve : CalibrationCurve
        The curve that applies.
    estimator : str
        Trade name of the fit, one of `liverfe.fit.ESTIMATORS`.

    Returns
    -------
    tuple of Finding
        ``fit-model-differs`` (note), or nothing where they agree or the paper's is not known.

    Raises
    ------
    ValueError
        If the estimator is unknown.
    """
    handling = estimator_named(estimator).noise_handling
    origin: NoiseHandling = curve.noise_handling
    if origin in ("unknown", handling):
        return ()
    return (
        Finding.of("fit-model-differs", key=curve.key, curve_handling=origin, handling=handling),
    )


def _named(key: str, site_curves: Sequence[CalibrationCurve]) -> CalibrationCurve:
    keys = [c.key for c in site_curves]
    twice = sorted({k for k in keys if keys.count(k) > 1})
    if twice:
        raise UsageError(
            f"own curve {twice[0]!r} is given twice; give each curve a key of its own."
        )
    return find_by_key(key, (*published_curves(), *site_curves), what="curve")


def _doubt_about_field(
    field_strength_t: float, imaging_frequency_mhz: float | None
) -> tuple[Finding, ...]:
    if field_key_t(field_strength_t) != _LABEL_OF_TWO_FIELDS_T:
        return ()
    if imaging_frequency_mhz is not None:
        measured_t = field_t_from_frequency_mhz(imaging_frequency_mhz)
        if field_key_t(measured_t) == _LABEL_OF_TWO_FIELDS_T:
            return ()
    return (Finding.of("field-not-confirmed", field=f"{field_strength_t:.4g}"),)


def _doubts_about_local(curve: CalibrationCurve) -> tuple[Finding, ...]:
    if not curve.is_local:
        return ()
    marked = Finding.of("local-curve", key=curve.key, fingerprint=curve.fingerprint)
    if field_key_t(curve.field_strength_t) is not None:
        return (marked,)
    field = f"{curve.field_strength_t:g}"
    return marked, Finding.of("local-curve-alone", field=field, key=curve.key)
