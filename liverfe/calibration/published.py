"""The published curves and band sets that ship, read from this room's TOML files."""

from __future__ import annotations

import importlib.resources
import tomllib
from collections.abc import Iterable, Mapping
from functools import cache
from typing import Any, cast, get_args

from liverfe.calibration.curve import CalibrationCurve, NoiseHandling
from liverfe.calibration.lookup import find_by_key
from liverfe.calibration.nouns import Band, BandSet, Evidence
from liverfe.calibration.tables import Table, TableFault, check_example, read_curve_numbers
from liverfe.errors import UsageError
from liverfe.sources import HowKnown, cite
from liverfe.wording.calibration import UNNAMED_BAND

_SCHEMA = 1


@cache
def published_curves() -> tuple[CalibrationCurve, ...]:
    """Give every published curve that ships.

    Returns
    -------
    tuple of CalibrationCurve
        By field, defaults first, in the order of ``published.toml``.

    Raises
    ------
    ValueError
        If the package's own file is wrong, a worked example included.
    """
    return read_curves(_package_file("published.toml"))


def read_curves(document: Mapping[str, Any]) -> tuple[CalibrationCurve, ...]:
    """Read the curves of a parsed ``published.toml``.

    Parameters
    ----------
    document : mapping
        As `tomllib` gives it.

    Returns
    -------
    tuple of CalibrationCurve
        In the order of the file.

    Raises
    ------
    ValueError
        If anything is missing, unknown, impossible or contradicts its worked example.
    """
    curves = tuple(_curve_from(values) for values in _rows(document, "curve"))
    _refuse_repeats((c.key for c in curves), "curve")
    fields = [c.field_strength_t for c in curves if c.is_default]
    _refuse_repeats((f"default at {field:g} T" for field in fields), "curve")
    return curves


def curve(key: str) -> CalibrationCurve:
    """Give one published curve.

    Parameters
    ----------
    key : str
        Its key, for example ``hernando2023_1p5``.

    Returns
    -------
    CalibrationCurve
        The curve.

    Raises
    ------
    UsageError
        If there is no such curve: all keys and the nearest spelling are named.
    """
    return find_by_key(key, published_curves(), what="curve")


@cache
def band_sets() -> tuple[BandSet, ...]:
    """Give every band set that ships.

    Returns
    -------
    tuple of BandSet
        In the order of ``bands.toml``, the house's own choice first.

    Raises
    ------
    ValueError
        If the package's own file is wrong.
    """
    return read_band_sets(_package_file("bands.toml"))


def read_band_sets(document: Mapping[str, Any]) -> tuple[BandSet, ...]:
    """Read the band sets of a parsed ``bands.toml``.

    Parameters
    ----------
    document : mapping
        As `tomllib` gives it.

    Returns
    -------
    tuple of BandSet
        In the order of the file.

    Raises
    ------
    ValueError
        If anything is missing, unknown or impossible.
    """
    sets = tuple(_band_set_from(values) for values in _rows(document, "band_set"))
    _refuse_repeats((s.key for s in sets), "band set")
    return sets


def band_set(key: str) -> BandSet:
    """Give one band set.

    Parameters
    ----------
    key : str
        Its key, for example ``pmc8528353``.

    Returns
    -------
    BandSet
        The set.

    Raises
    ------
    UsageError
        If there is no such set: all keys and the nearest spelling are named.
    """
    return find_by_key(key, band_sets(), what="band set")


def _package_file(name: str) -> dict[str, Any]:
    text = importlib.resources.files("liverfe.calibration").joinpath(name).read_text("utf-8")
    return tomllib.loads(text)


def _rows(document: Mapping[str, Any], name: str) -> list[Mapping[str, Any]]:
    if document.get("schema") != _SCHEMA:
        raise ValueError(f"schema is {document.get('schema')!r}, wanted {_SCHEMA}")
    rows = document.get(name)
    if not isinstance(rows, list) or not rows:
        raise ValueError(f"the file holds no [[{name}]]")
    return rows


def _refuse_repeats(names: Iterable[str], what: str) -> None:
    seen: set[str] = set()
    for name in names:
        if name in seen:
            raise ValueError(f"{what} {name!r} stands there twice")
        seen.add(name)


def _cited(reference_key: str, table: Table) -> str:
    try:
        return cite(reference_key)
    except UsageError as error:
        raise table.fault(f"reference_key: {error}") from error


def _curve_from(values: Mapping[str, Any]) -> CalibrationCurve:
    table = Table(values, f"curve {values.get('key')!r}")
    reference_key = table.text("reference_key")
    try:
        made = CalibrationCurve(
            key=table.text("key"),
            reference_key=reference_key,
            citation=_cited(reference_key, table),
            equation=table.text("equation"),
            evidence=cast(Evidence, table.choice("evidence", get_args(HowKnown))),
            evidence_note=table.text("evidence_note"),
            fit_model_of_origin=table.text("fit_model_of_origin"),
            noise_handling=cast(
                NoiseHandling, table.choice("noise_handling", get_args(NoiseHandling))
            ),
            reference_method=table.text("reference_method"),
            cohort=table.text("cohort"),
            is_default=table.flag("is_default"),
            **read_curve_numbers(table),
        )
    except TableFault:
        raise
    except ValueError as error:
        raise table.fault(str(error)) from error
    table.done()
    check_example(made, table)
    return made


def _band_set_from(values: Mapping[str, Any]) -> BandSet:
    table = Table(values, f"band set {values.get('key')!r}")
    thresholds = table.numbers("thresholds_mg_per_g")
    names = table.texts("names")
    belongs_to = table.texts("threshold_belongs_to")
    if len(names) != len(thresholds) + 1 or len(belongs_to) != len(thresholds):
        raise table.fault(
            f"{len(thresholds)} thresholds want {len(thresholds) + 1} names and "
            f"{len(thresholds)} words in threshold_belongs_to."
        )
    if not set(belongs_to) <= {"lower", "upper"}:
        raise table.fault("threshold_belongs_to takes the words lower and upper.")
    reference_key = table.text("reference_key")
    edges: list[float | None] = [None, *thresholds, None]
    made = BandSet(
        key=table.text("key"),
        reference_key=reference_key,
        citation=_cited(reference_key, table),
        where=table.text("where"),
        evidence=cast(Evidence, table.choice("evidence", get_args(HowKnown))),
        threshold_note=table.text("threshold_note"),
        bands=tuple(
            Band(
                name=name or UNNAMED_BAND,
                low_mg_per_g=edges[i],
                high_mg_per_g=edges[i + 1],
                low_closed=i > 0 and belongs_to[i - 1] == "upper",
                high_closed=i < len(belongs_to) and belongs_to[i] == "lower",
            )
            for i, name in enumerate(names)
        ),
    )
    table.done()
    return made
