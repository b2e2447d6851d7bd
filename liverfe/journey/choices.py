"""The method of a run: a locked file or the house's, with curve and bands as asked for."""

from __future__ import annotations

import dataclasses
import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from liverfe.calibration import CalibrationCurve, band_sets, published_curves, site_curve
from liverfe.errors import UsageError
from liverfe.journey.settings import Settings, nearest
from liverfe.study import Method
from liverfe.wording.command_line import (
    BANDS_UNKNOWN,
    CURVE_FILE_UNNAMED,
    CURVE_FILE_UNREADABLE,
    CURVE_UNKNOWN,
    METHOD_FILE_UNREADABLE,
    METHOD_IS_LOCKED,
    ORIGIN_FLAG,
)


def choose_method(settings: Settings) -> tuple[Method, tuple[CalibrationCurve, ...]]:
    """Make the method that a run will use, and read a site's own curves.

    Parameters
    ----------
    settings : Settings
        As resolved.

    Returns
    -------
    method : Method
        With curve and bands; both are known keys.
    site_curves : tuple of CalibrationCurve
        From the curve files.

    Raises
    ------
    UsageError
        If a file cannot be read, a key is unknown, or a flag contradicts a locked method.
    """
    table = read_table(settings.method, METHOD_FILE_UNREADABLE) if settings.method else {}
    method = Method.from_mapping(table)
    for name in ("curve", "bands"):
        asked = getattr(settings, name)
        if asked is None:
            continue
        if name in table:
            _refuse_contradiction(name, table[name], asked, settings)
        else:
            method = dataclasses.replace(method, **{name: asked})
    curves = tuple(read_site_curve(path) for path in settings.curve_file)
    _check_keys(method, curves)
    _refuse_unnamed_curve_file(settings, method, curves)
    return method, curves


def read_site_curve(path: Path) -> CalibrationCurve:
    """Read a site's own calibration curve.

    Parameters
    ----------
    path : Path
        A TOML file; its keys are described in `docs/howto/site-curve.md`.

    Returns
    -------
    CalibrationCurve
        Marked local.

    Raises
    ------
    UsageError
        If it cannot be read or is not possible.
    """
    return site_curve(read_table(path, CURVE_FILE_UNREADABLE))


def read_table(path: Path, message: str) -> Mapping[str, Any]:
    """Read a TOML file.

    Parameters
    ----------
    path : Path
        The file.
    message : str
        What to say where that fails, with ``{path}`` and ``{reason}``.

    Returns
    -------
    mapping
        Its table.

    Raises
    ------
    UsageError
        If it is not there or not TOML.
    """
    try:
        return tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as error:
        raise UsageError(message.format(path=path, reason=error)) from error


def _refuse_contradiction(name: str, locked: object, asked: object, settings: Settings) -> None:
    """Let a locked method stand against weaker settings, and refuse one that is as strong."""
    if locked == asked:
        return
    if settings.ranks[name] <= settings.ranks["method"]:
        raise UsageError(
            METHOD_IS_LOCKED.format(
                name=name, locked=locked, origin=settings.origins[name], asked=asked
            )
        )


def _check_keys(method: Method, site_curves: tuple[CalibrationCurve, ...]) -> None:
    curve_keys = [c.key for c in (*published_curves(), *site_curves)]
    if method.curve is not None and method.curve not in curve_keys:
        raise UsageError(
            CURVE_UNKNOWN.format(key=method.curve, nearest=nearest(method.curve, curve_keys))
        )
    band_keys = [bands.key for bands in band_sets()]
    if method.bands not in band_keys:
        raise UsageError(
            BANDS_UNKNOWN.format(key=method.bands, nearest=nearest(method.bands, band_keys))
        )


def _refuse_unnamed_curve_file(
    settings: Settings, method: Method, site_curves: tuple[CalibrationCurve, ...]
) -> None:
    # Whoever gives a curve file on the command line expects it to be used; a published curve
    # applied in its place would be a silent surprise.
    by_flag = settings.origins.get("curve_file", "").startswith(ORIGIN_FLAG.split("{")[0])
    if by_flag and site_curves and method.curve is None:
        raise UsageError(CURVE_FILE_UNNAMED.format(key=site_curves[0].key))
