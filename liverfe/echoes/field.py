"""Which field strength a scanner really ran at."""

from __future__ import annotations

from liverfe.errors import Finding
from liverfe.units import field_t_from_frequency_mhz

_SAME_FIELD_T = 0.02
"""Stated field and frequency this close say the same field: rounding, not a different magnet."""

_BELIEVABLE_RATIO = 0.06
"""Stated field and frequency may differ by this share (3 T against 2.89 T is 3.7 %); a greater
difference cannot be a rounded label, so one of the two is wrong."""


def settle_field_strength(
    stated_t: float | None, imaging_frequency_mhz: float | None
) -> tuple[float | None, tuple[Finding, ...]]:
    """Settle the field strength from what is stated and the imaging frequency.

    Some scanners state 3 T and run at 2.89 T, which has a calibration curve of its own: there the
    imaging frequency decides, and a note says so. Nothing is guessed: without either there is no
    field strength, and where the two cannot both be true there is none either.

    Parameters
    ----------
    stated_t : float or None
        Magnetic field strength as stated, in T (DICOM (0018,0087)).
    imaging_frequency_mhz : float or None
        Proton imaging frequency in MHz (DICOM (0018,0084)).

    Returns
    -------
    field_strength_t : float or None
        The settled field in T.
    findings : tuple of Finding
        ``field-from-frequency`` (note), ``field-conflict`` (caution) or nothing.
    """
    stated = stated_t if stated_t and stated_t > 0 else None
    frequency = (
        imaging_frequency_mhz if imaging_frequency_mhz and imaging_frequency_mhz > 0 else None
    )
    if frequency is None:
        return stated, ()
    measured_t = field_t_from_frequency_mhz(frequency)
    if stated is None:
        return measured_t, (
            Finding.of("field-from-frequency", stated="no field", measured=f"{measured_t:.3f}"),
        )
    if abs(stated - measured_t) <= _SAME_FIELD_T:
        return stated, ()
    if abs(stated - measured_t) <= _BELIEVABLE_RATIO * stated:
        return measured_t, (
            Finding.of(
                "field-from-frequency", stated=f"{stated:g} T", measured=f"{measured_t:.3f}"
            ),
        )
    return None, (Finding.of("field-conflict", stated=f"{stated:g}", measured=f"{measured_t:.3f}"),)
