"""`regions.csv` and the batch's `summary.csv`: safe to open in a spreadsheet.

Both are read from the document of `result.json`, so they cannot say anything else. A cell of text
that a spreadsheet would run as a formula gets an apostrophe in front; numbers stay numbers, the
negative ones too.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

__all__ = [
    "REGION_COLUMNS",
    "SUMMARY_COLUMNS",
    "regions_csv",
    "safe_cell",
    "summary_csv",
    "summary_row",
]

Cell = str | int | float | None

_FORMULA_STARTS = ("=", "+", "-", "@", "\uff1d", "\uff0b", "\uff0d", "\uff20")
"""What starts a formula in spreadsheets, full-width forms included (OWASP: CSV injection)."""

REGION_COLUMNS = (
    "key", "region", "organ", "headline",
    "r2star_per_s", "r2star_qualifier", "r2star_low_per_s", "r2star_high_per_s",
    "r2star_statistic", "r2star_iqr_per_s", "r2star_mean_per_s", "r2star_sd_per_s",
    "r2star_sd_biological_per_s",
    "t2star_ms", "t2star_qualifier",
    "lic_mg_per_g", "lic_qualifier", "lic_low_mg_per_g", "lic_high_mg_per_g", "lic_umol_per_g",
    "lic_basis", "band", "band_low_mg_per_g", "band_high_mg_per_g", "band_set",
    "limit_low_r2star_per_s", "limit_high_r2star_per_s",
    "limit_low_lic_mg_per_g", "limit_high_lic_mg_per_g",
    "volume_ml", "n_slices", "n_voxels", "n_used", "n_over_limit", "n_under_limit", "n_no_signal",
    "n_failed", "n_trimmed", "field_strength_t", "curve", "curve_local", "method", "findings",
    "caution",
)  # fmt: skip
"""Columns of `regions.csv`, one row a region."""

SUMMARY_COLUMNS = (
    "key", "patient_key", "date", "outcome", "headline",
    "r2star_per_s", "r2star_low_per_s", "r2star_high_per_s",
    "lic_mg_per_g", "qualifier", "lic_low_mg_per_g", "lic_high_mg_per_g",
    "band", "band_low_mg_per_g", "band_high_mg_per_g", "band_set",
    "field_strength_t", "curve", "curve_local", "method", "findings", "reason", "caution",
)  # fmt: skip
"""Columns of a batch's `summary.csv`, one row a stack or refused study."""


def regions_csv(document: Mapping[str, Any]) -> bytes:
    """Make the table of regions.

    Parameters
    ----------
    document : mapping
        As `result_document` gives it.

    Returns
    -------
    bytes
        UTF-8, comma-separated, a header, one row a region; lines end in a line feed.
    """
    return _table(REGION_COLUMNS, [_region_row(document, r) for r in document["regions"]])


def summary_row(document: Mapping[str, Any]) -> dict[str, Cell]:
    """Make a study's row of the batch's summary.

    Parameters
    ----------
    document : mapping
        As `result_document` gives it.

    Returns
    -------
    dict
        One safe cell for each of `SUMMARY_COLUMNS`; None where there is nothing to say. `reason`
        holds what stopped the study, else what a reader must see.
    """
    region = next((r for r in document["regions"] if r["name"] == document["headline"]), None)
    cells: dict[str, Cell] = dict.fromkeys(SUMMARY_COLUMNS)
    if region:
        full = _region_row(document, region)
        cells |= {column: full[column] for column in SUMMARY_COLUMNS if column in full}
        # LIC is an increasing function of R2*, so one qualifier serves both.
        cells["qualifier"] = full["lic_qualifier"] or full["r2star_qualifier"]
    cells |= {
        **_same_for_all(document),
        "patient_key": document["study"]["patient_key"],
        "date": document["study"]["date"],
        "outcome": document["outcome"],
        "headline": document["headline"],
        "findings": _codes(f["code"] for f in document["findings"]),
        "reason": _reason(document["findings"]),
    }
    return {column: safe_cell(cells[column]) for column in SUMMARY_COLUMNS}


def summary_csv(rows: Iterable[Mapping[str, Cell]]) -> bytes:
    """Make a batch's `summary.csv`.

    Parameters
    ----------
    rows : iterable of mapping
        From `summary_row`, or made by hand for a study that has no document; columns that a row
        lacks stay empty.

    Returns
    -------
    bytes
        UTF-8, comma-separated, a header, one row each; lines end in a line feed.
    """
    return _table(SUMMARY_COLUMNS, rows)


def safe_cell(value: Cell) -> Cell:
    """Make a value safe for a spreadsheet.

    Parameters
    ----------
    value : str, int, float or None
        Numbers stay as they are.

    Returns
    -------
    str, int, float or None
        Text on one line; with an apostrophe in front where a spreadsheet would take it for a
        formula. A safe text is left as it is, so doing it twice changes nothing.
    """
    if not isinstance(value, str):
        return value
    line = "".join(char if char.isprintable() else " " for char in value)
    return f"'{line}" if line.lstrip().startswith(_FORMULA_STARTS) else line


def _region_row(document: Mapping[str, Any], region: Mapping[str, Any]) -> dict[str, Cell]:
    r2star, lic, band = region["r2star_per_s"], region["lic_mg_per_g"] or {}, region["band"] or {}
    limits = region["limits"]
    low_r2star, high_r2star = limits["r2star_per_s"]
    low_lic, high_lic = limits["lic_mg_per_g"] or (None, None)
    as_they_are = {column: region[column] for column in REGION_COLUMNS if column in region}
    return {
        **as_they_are,
        **_same_for_all(document),
        "region": region["name"],
        "headline": "yes" if region["name"] == document["headline"] else "no",
        "r2star_per_s": r2star["value"],
        "r2star_qualifier": r2star["qualifier"],
        "r2star_low_per_s": r2star["low"],
        "r2star_high_per_s": r2star["high"],
        "r2star_statistic": r2star["statistic"],
        "r2star_iqr_per_s": r2star["iqr"],
        "r2star_mean_per_s": r2star["mean"],
        "r2star_sd_per_s": r2star["sd"],
        "r2star_sd_biological_per_s": r2star["sd_biological"],
        "lic_mg_per_g": lic.get("value"),
        "lic_qualifier": lic.get("qualifier"),
        "lic_low_mg_per_g": lic.get("low"),
        "lic_high_mg_per_g": lic.get("high"),
        "lic_basis": lic.get("basis"),
        "band": band.get("name"),
        "band_low_mg_per_g": band.get("low_mg_per_g"),
        "band_high_mg_per_g": band.get("high_mg_per_g"),
        "band_set": band.get("set"),
        "limit_low_r2star_per_s": low_r2star,
        "limit_high_r2star_per_s": high_r2star,
        "limit_low_lic_mg_per_g": low_lic,
        "limit_high_lic_mg_per_g": high_lic,
        "findings": _codes(region["findings"]),
    }


def _same_for_all(document: Mapping[str, Any]) -> dict[str, Cell]:
    """Cells that stand in every row of a study."""
    curve = document["calibration"]
    return {
        "key": document["study"]["key"],
        "field_strength_t": (document["stack"] or {}).get("field_strength_t"),
        "curve": curve["key"] if curve else None,
        "curve_local": ("LOCAL" if curve["local"] else "no") if curve else None,
        "method": document["method"]["id"],
        "caution": document["caution"],
    }


def _reason(findings: Sequence[Mapping[str, str]]) -> str | None:
    """What stopped a study with what to do; else the cautions; nothing where there are none."""
    for level in ("stop", "caution"):
        sentences = [f"{f['text']} {f['remedy']}" for f in findings if f["level"] == level]
        if sentences:
            return " ".join(sentences)
    return None


def _codes(codes: Iterable[str]) -> str | None:
    return " ".join(dict.fromkeys(codes)) or None


def _table(columns: Sequence[str], rows: Iterable[Mapping[str, Cell]]) -> bytes:
    text = io.StringIO()
    writer = csv.DictWriter(text, columns, restval=None, lineterminator="\n")
    writer.writeheader()
    for row in rows:
        writer.writerow({column: safe_cell(cell) for column, cell in row.items()})
    return text.getvalue().encode()
