"""A site's own curve, from the parsed TOML file that `docs/howto/own-curve.md` describes.

A hand-edited curve is where a factor of ten gets in (0.2603 typed for 0.02603; faults sheet, E10).
So a site's own curve states a worked example that it must give, and must not lie far from the
published curves of its field.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping, Sequence
from typing import Any, cast, get_args

import numpy as np

from liverfe.calibration.curve import CalibrationCurve, NoiseHandling
from liverfe.calibration.fields import curves_for_field
from liverfe.calibration.published import published_curves
from liverfe.calibration.tables import Table, TableFault, check_example, read_curve_numbers
from liverfe.errors import UsageError

_KEY = re.compile(r"[a-z][a-z0-9_]{2,39}")
"""Keys stand in file names, tables and commands."""

_CHECKED_R2STAR_PER_S = (100.0, 300.0, 1000.0)
"""Where a curve is compared with the published ones: the range in which those lie together. Lower
down their intercepts, which differ in sign, decide."""

_PLAUSIBLE_SHARE = (0.5, 2.0)
"""A site's own curve may lie this far outside all published curves of its field. They differ among
themselves by 1.3 at 1.5 T and R2* 1000 1/s (calibrations sheet, 9.3); a slip of the decimal point
is 10, grams for micromoles 17.9, wet for dry weight about 3.3, T2* in seconds 1000."""

_PLAUSIBLE_SHARE_SCALED = (0.25, 4.0)
"""The same where no curve of the field is published and those of 1.5 T are scaled to it."""

_SCALED_FROM_T = 1.5


def site_curve(values: Mapping[str, Any]) -> CalibrationCurve:
    """Make a site's own curve.

    Parameters
    ----------
    values : mapping
        A parsed TOML file; the keys are described in ``docs/howto/own-curve.md``.

    Returns
    -------
    CalibrationCurve
        With ``is_local`` true and evidence ``local``; it is never a default, so it is used only
        where its key is named.

    Raises
    ------
    UsageError
        If a key is missing, unknown or impossible, if the curve's key is that of a published one,
        if its worked example does not come out, or if LIC lies far from all published curves.
    """
    name = values.get("key")
    table = Table(values, f"own curve {name!r}" if isinstance(name, str) else "own curve")
    try:
        curve = _read(table)
        check_example(curve, table)
        _check_plausible(curve, table)
    except TableFault as fault:
        raise UsageError(str(fault)) from fault
    except ValueError as error:
        raise UsageError(str(table.fault(str(error)))) from error
    return curve


def _read(table: Table) -> CalibrationCurve:
    key = table.text("key")
    if not _KEY.fullmatch(key):
        raise table.fault(
            "key must be 3 to 40 lower-case letters, digits and underscores, a letter first."
        )
    if key in {published.key for published in published_curves()}:
        raise table.fault("a published curve has this key; choose another.")
    handling = (
        table.choice("noise_handling", get_args(NoiseHandling))
        if table.has("noise_handling")
        else "unknown"
    )
    table.flag("no_published_curve")
    curve = CalibrationCurve(
        key=key,
        reference_key="",
        citation=table.text("citation"),
        equation=table.text("equation"),
        evidence="local",
        evidence_note="the site's own statement",
        fit_model_of_origin=table.text("fit_model_of_origin"),
        noise_handling=cast(NoiseHandling, handling),
        reference_method=table.text("reference_method"),
        cohort=table.text("cohort"),
        is_default=False,
        is_local=True,
        **read_curve_numbers(table),
    )
    table.done()
    return curve


def _check_plausible(curve: CalibrationCurve, table: Table) -> None:
    """Refuse a curve that lies far from all published ones of its field."""
    field = curve.field_strength_t
    published = curves_for_field(field)
    opted = table.flag("no_published_curve")
    if published and opted:
        raise table.fault(
            f"no_published_curve = true, but there are published curves at {field:g} T: "
            f"{', '.join(c.key for c in published)}. Remove the line."
        )
    if not published and not opted:
        raise table.fault(
            f"no curve is published at {field:g} T, so this one cannot be held against any. "
            "Check field_strength_t; if it is right, say so by no_published_curve = true."
        )
    if published:
        _compare(curve, table, [c.lic_mg_per_g for c in published], 1.0, _PLAUSIBLE_SHARE)
        return
    # The iron part of R2* is proportional to the field (wang2021: 2.00 from 1.5 to 3.0 T). Good
    # enough to catch a wrong unit, and for nothing else: it is never used for a LIC.
    scale = field / _SCALED_FROM_T
    reference = [c.lic_mg_per_g for c in curves_for_field(_SCALED_FROM_T)]
    _compare(curve, table, reference, scale, _PLAUSIBLE_SHARE_SCALED)


def _compare(
    curve: CalibrationCurve,
    table: Table,
    published: Sequence[Callable[[float], float]],
    scale: float,
    share: tuple[float, float],
) -> None:
    for r2star_per_s in np.asarray(_CHECKED_R2STAR_PER_S) * scale:
        lics = [lic(r2star_per_s / scale) for lic in published]
        low, high = share[0] * min(lics), share[1] * max(lics)
        given = curve.lic_mg_per_g(float(r2star_per_s))
        if not (math.isfinite(given) and low <= given <= high):
            raise table.fault(
                f"at R2* {r2star_per_s:g} 1/s and {curve.field_strength_t:g} T it gives "
                f"{given:.2f} mg/g; the published curves give {min(lics):.2f} to {max(lics):.2f}"
                f"{f', scaled from {_SCALED_FROM_T:g} T' if scale != 1.0 else ''}, and "
                f"{low:.2f} to {high:.2f} is the widest that is believed. "
                "Check the decimal point, the unit (published_unit) and the field."
            )
