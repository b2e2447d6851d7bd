"""`liverfe curves`: calibration curves and band sets, with how each is known."""

from __future__ import annotations

from typing import Any

from liverfe.cli.frame import AsJson, CurveFiles
from liverfe.cli.screen import show, show_document, show_table
from liverfe.wording import command_line as words


def curves(curve_file: CurveFiles = None, as_json: AsJson = False) -> int:
    """List what ships, and a site's own."""
    from liverfe.journey import describe_curves, resolve_settings

    document = describe_curves(resolve_settings({"curve_file": curve_file}).curve_file)
    if as_json:
        show_document(document)
        return 0
    show_table(
        words.CURVES_COLUMNS,
        [_curve_row(curve) for curve in document["curves"]],
        title=words.CURVES_TITLE,
    )
    show_table(
        words.BANDS_COLUMNS,
        [_band_row(bands, band) for bands in document["band_sets"] for band in bands["bands"]],
        title=words.BANDS_TITLE,
    )
    show(
        words.CURVES_LAST.format(
            n_curves=len(document["curves"]), n_bands=len(document["band_sets"])
        )
    )
    return 0


def _curve_row(curve: dict[str, Any]) -> tuple[str, ...]:
    mark = "{key}"
    if curve["default"]:
        mark = words.CURVE_DEFAULT_MARK
    elif curve["local"]:
        mark = words.CURVE_LOCAL_MARK
    studied = words.CURVE_RANGE_UNKNOWN
    if curve["valid_r2star_per_s"]:
        low, high = curve["valid_r2star_per_s"]
        studied = words.CURVE_RANGE.format(low=low, high=high)
    return (
        mark.format(key=curve["key"]),
        words.FIELD_T.format(field=curve["field_strength_t"]),
        curve["equation"],
        studied,
        curve["evidence"],
        curve["citation"],
    )


def _band_row(bands: dict[str, Any], band: dict[str, Any]) -> tuple[str, ...]:
    edges = [band["low_mg_per_g"], band["high_mg_per_g"]]
    low, high = ["" if edge is None else f"{edge:g}" for edge in edges]
    return (bands["key"], band["name"], low, high, bands["citation"])
