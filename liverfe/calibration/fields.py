"""Which curves hold at a field strength.

R2* of iron grows with the field, so a curve holds at its own field only: used at another one, LIC
is wrong by up to the ratio of the fields (faults sheet, E1 and E2).
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from liverfe.calibration.curve import CalibrationCurve
from liverfe.calibration.published import published_curves

_FIELDS_T = (
    (1.5, 1.45, 1.55),
    # 2.89 T and 3.0 T are 3.7 % apart and hernando2023 gives each its own equation; between the
    # two windows lies no magnet that is sold, and no curve.
    (2.89, 2.86, 2.93),
    (3.0, 2.95, 3.05),
)
"""Fields with published curves: (name, lowest, highest), in T, ends included."""

_SAME_FIELD_SHARE = 0.02
"""Where no curve is published, a site's own holds within this share of its field: wide enough for
a magnet's rounded label (7 T runs at 6.98 T), narrower than the step from 2.89 to 3.0 T."""


def field_key_t(field_strength_t: float | None) -> float | None:
    """Tell which published field a field strength counts as.

    Parameters
    ----------
    field_strength_t : float or None
        Settled field strength in T (`liverfe.echoes.settle_field_strength`); None: unknown.

    Returns
    -------
    float or None
        1.5 (1.45 to 1.55 T), 2.89 (2.86 to 2.93 T) or 3.0 (2.95 to 3.05 T); None elsewhere.
    """
    if field_strength_t is None:
        return None
    return next((name for name, low, high in _FIELDS_T if low <= field_strength_t <= high), None)


def holds_at(curve: CalibrationCurve, field_strength_t: float | None) -> bool:
    """Tell whether a curve may be used at a field strength.

    Parameters
    ----------
    curve : CalibrationCurve
        Published, or a site's own.
    field_strength_t : float or None
        Settled field strength in T.

    Returns
    -------
    bool
        Whether both are the same field. A "3 T" curve does not hold at 2.89 T: the difference of
        4 % in LIC is what `hernando2023` gives 2.89 T an equation of its own for, and no paper
        says that ``dassignies2018`` was made at anything but 3 T.
    """
    if field_strength_t is None or not math.isfinite(field_strength_t):
        return False
    data_key, curve_key = field_key_t(field_strength_t), field_key_t(curve.field_strength_t)
    if data_key is None and curve_key is None:
        apart = abs(field_strength_t - curve.field_strength_t)
        return apart <= _SAME_FIELD_SHARE * curve.field_strength_t
    return data_key == curve_key


def curves_for_field(
    field_strength_t: float | None, *, site_curves: Sequence[CalibrationCurve] = ()
) -> tuple[CalibrationCurve, ...]:
    """Give every curve that holds at a field strength.

    Parameters
    ----------
    field_strength_t : float or None
        Settled field strength in T.
    site_curves : sequence of CalibrationCurve
        A site's own, looked at beside the published ones.

    Returns
    -------
    tuple of CalibrationCurve
        The default first, a site's own last; empty where none holds.
    """
    held = [c for c in (*published_curves(), *site_curves) if holds_at(c, field_strength_t)]
    return tuple(sorted(held, key=lambda c: not c.is_default))


def default_curve(field_strength_t: float | None) -> CalibrationCurve | None:
    """Give the curve that is used where none is named.

    Parameters
    ----------
    field_strength_t : float or None
        Settled field strength in T.

    Returns
    -------
    CalibrationCurve or None
        None where the field is unknown or has no published curve.
    """
    return next((c for c in curves_for_field(field_strength_t) if c.is_default), None)
