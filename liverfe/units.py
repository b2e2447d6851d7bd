"""The only unit conversions of the package, and the UCUM codes of its quantities.

Names of quantities carry their unit everywhere (`echo_times_ms`, `r2star_per_s`, `lic_mg_per_g`),
so a conversion that is not in this file is a mistake.
"""

from __future__ import annotations

from typing import overload

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "IRON_MOLAR_MASS_G_PER_MOL",
    "PROTON_GYROMAGNETIC_RATIO_MHZ_PER_T",
    "UCUM",
    "field_t_from_frequency_mhz",
    "lic_umol_per_g_from_mg_per_g",
    "mg_per_g_from_umol_per_g",
    "ml_from_mm3",
    "ms_from_s",
    "r2star_per_s_from_t2star_ms",
    "s_from_ms",
    "t2star_ms_from_r2star_per_s",
]

IRON_MOLAR_MASS_G_PER_MOL = 55.845
"""Standard atomic weight of iron (IUPAC; secondary)."""

PROTON_GYROMAGNETIC_RATIO_MHZ_PER_T = 42.577478518
"""Proton gyromagnetic ratio over 2 pi (CODATA 2018; secondary)."""

UCUM = {
    "r2star_per_s": "/s",
    "t2star_ms": "ms",
    "lic_mg_per_g": "mg/g{dry_weight}",
    "lic_umol_per_g": "umol/g{dry_weight}",
    "volume_ml": "mL",
    "field_strength_t": "T",
    "echo_times_ms": "ms",
}
"""UCUM code of each quantity that leaves the package."""

_MS_PER_S = 1000.0
_MM3_PER_ML = 1000.0

Array = NDArray[np.floating]


def ms_from_s(seconds: float) -> float:
    """Convert seconds to milliseconds."""
    return seconds * _MS_PER_S


@overload
def s_from_ms(milliseconds: float) -> float: ...
@overload
def s_from_ms(milliseconds: Array) -> Array: ...
def s_from_ms(milliseconds: float | Array) -> float | Array:
    """Convert milliseconds to seconds; an array keeps its shape and kind."""
    return milliseconds / _MS_PER_S


def ml_from_mm3(cubic_millimetres: float) -> float:
    """Convert cubic millimetres to millilitres."""
    return cubic_millimetres / _MM3_PER_ML


@overload
def t2star_ms_from_r2star_per_s(r2star_per_s: float) -> float: ...
@overload
def t2star_ms_from_r2star_per_s(r2star_per_s: Array) -> Array: ...
def t2star_ms_from_r2star_per_s(r2star_per_s: float | Array) -> float | Array:
    """Convert R2* (1/s) to T2* (ms); zero or negative R2* has no T2* and gives NaN.

    Parameters
    ----------
    r2star_per_s : float or ndarray
        R2* in 1/s; NaN stays NaN.

    Returns
    -------
    float or ndarray
        T2* in ms, same shape and kind.
    """
    if isinstance(r2star_per_s, np.ndarray):
        result = np.full_like(r2star_per_s, np.nan)
        np.divide(_MS_PER_S, r2star_per_s, out=result, where=r2star_per_s > 0)
        return result
    return _MS_PER_S / r2star_per_s if r2star_per_s > 0 else float("nan")


def r2star_per_s_from_t2star_ms(t2star_ms: float) -> float:
    """Convert T2* (ms) to R2* (1/s)."""
    return _MS_PER_S / t2star_ms


def lic_umol_per_g_from_mg_per_g(lic_mg_per_g: float) -> float:
    """Convert LIC from mg/g to µmol/g (both dry weight); 1 mg/g = 17.9067 µmol/g."""
    return lic_mg_per_g * 1000.0 / IRON_MOLAR_MASS_G_PER_MOL


def mg_per_g_from_umol_per_g(lic_umol_per_g: float) -> float:
    """Convert LIC from µmol/g to mg/g (both dry weight)."""
    return lic_umol_per_g * IRON_MOLAR_MASS_G_PER_MOL / 1000.0


def field_t_from_frequency_mhz(imaging_frequency_mhz: float) -> float:
    """Convert a proton imaging frequency (MHz) to field strength (T)."""
    return imaging_frequency_mhz / PROTON_GYROMAGNETIC_RATIO_MHZ_PER_T
