"""Reading one table of a TOML file of curves or bands, with plain words where it is wrong.

Published curves and a site's own go through the same door, so that a curve is never less checked
for being local.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any, TypedDict

from liverfe.calibration.curve import CalibrationCurve
from liverfe.calibration.nouns import Form

EXAMPLE_TOLERANCE_MG_PER_G = 0.0005
"""A worked example must come out this closely; the tolerance of a figure printed to 0.001."""

_COEFFICIENTS: dict[Form, tuple[str, str]] = {
    "linear": ("slope", "intercept"),
    "power": ("factor", "exponent"),
}

_LONGEST_TEXT = 300
"""Texts of a curve stand in one line of a report."""


class TableFault(ValueError):
    """A table of a curve or band file is wrong; the message says where and what was wanted."""


class CurveNumbers(TypedDict):
    """The part of a curve that moves numbers, as `CalibrationCurve` takes it."""

    field_strength_t: float
    form: Form
    coefficients: tuple[float, float]
    published_unit: Any
    valid_r2star_per_s: tuple[float, float] | None
    example: tuple[float, float]


class Table:
    """One table of a TOML file, read key by key.

    Parameters
    ----------
    values : mapping
        As `tomllib` gives it.
    where : str
        What messages call it, for example ``curve 'wood2005'``.
    """

    def __init__(self, values: Mapping[str, Any], where: str) -> None:
        self._values = values
        self._where = where
        self._asked: set[str] = set()

    def fault(self, message: str) -> TableFault:
        """Make the error that says `message` about this table."""
        return TableFault(f"{self._where}: {message}")

    def has(self, key: str) -> bool:
        """Tell whether the table states `key`."""
        self._asked.add(key)
        return key in self._values

    def text(self, key: str, *, may_be_empty: bool = False) -> str:
        """Read one line of text."""
        value = self._take(key)
        if not isinstance(value, str):
            raise self.fault(f"{key} = {value!r} is not text.")
        if not value.strip() and not may_be_empty:
            raise self.fault(f"{key} is empty.")
        if len(value) > _LONGEST_TEXT or not value.isprintable():
            raise self.fault(f"{key} must be one line of at most {_LONGEST_TEXT} characters.")
        return value

    def choice(self, key: str, choices: tuple[str, ...]) -> str:
        """Read one of the words `choices`."""
        value = self._take(key)
        if value not in choices:
            raise self.fault(f"{key} = {value!r}; wanted one of: {', '.join(choices)}.")
        return str(value)

    def flag(self, key: str) -> bool:
        """Read true or false; false where it is not stated."""
        value = self._take(key) if self.has(key) else False
        if not isinstance(value, bool):
            raise self.fault(f"{key} = {value!r}; wanted true or false.")
        return value

    def number(self, key: str) -> float:
        """Read a finite number."""
        return self._number(key, self._take(key))

    def numbers(self, key: str) -> tuple[float, ...]:
        """Read a list of finite numbers."""
        return tuple(self._number(key, value) for value in self._list(key))

    def texts(self, key: str) -> tuple[str, ...]:
        """Read a list of texts, some of which may be empty."""
        values = self._list(key)
        if not all(isinstance(value, str) for value in values):
            raise self.fault(f"{key} = {values!r}; wanted a list of texts.")
        return tuple(values)

    def table(self, key: str) -> Table:
        """Read a table within this one."""
        value = self._take(key)
        if not isinstance(value, Mapping):
            raise self.fault(f"{key} = {value!r}; wanted a table.")
        return Table(value, f"{self._where}, {key}")

    def done(self) -> None:
        """Refuse keys that nobody asked for: a misspelt key would else be silently lost."""
        unknown = sorted(set(self._values) - self._asked)
        if unknown:
            raise self.fault(f"unknown key {unknown[0]!r}.")

    def _take(self, key: str) -> Any:
        if not self.has(key):
            raise self.fault(f"{key} is missing.")
        return self._values[key]

    def _list(self, key: str) -> list[Any]:
        value = self._take(key)
        if not isinstance(value, list):
            raise self.fault(f"{key} = {value!r}; wanted a list.")
        return value

    def _number(self, key: str, value: object) -> float:
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise self.fault(f"{key} = {value!r} is not a number.")
        if not math.isfinite(value):
            raise self.fault(f"{key} = {value!r} is not a finite number.")
        return float(value)


def read_curve_numbers(table: Table) -> CurveNumbers:
    """Read what moves a number: field, form, coefficients, unit, range, worked example.

    Parameters
    ----------
    table : Table
        One curve.

    Returns
    -------
    CurveNumbers
        Ready for `CalibrationCurve`.

    Raises
    ------
    TableFault
        If a key is missing or its value is not possible.
    """
    form: Form = "power" if table.choice("form", tuple(_COEFFICIENTS)) == "power" else "linear"
    first, second = _COEFFICIENTS[form]
    span = table.numbers("valid_r2star_per_s") if table.has("valid_r2star_per_s") else None
    if span is not None and len(span) != 2:
        raise table.fault(f"valid_r2star_per_s = {list(span)}; wanted [low, high].")
    example = table.table("example")
    numbers = CurveNumbers(
        field_strength_t=table.number("field_strength_t"),
        form=form,
        coefficients=(table.number(first), table.number(second)),
        published_unit=table.choice("published_unit", ("mg/g", "umol/g")),
        valid_r2star_per_s=None if span is None else (span[0], span[1]),
        example=(example.number("r2star_per_s"), example.number("lic_mg_per_g")),
    )
    example.done()
    return numbers


def check_example(curve: CalibrationCurve, table: Table) -> None:
    """Refuse a curve that does not give its own worked example.

    Parameters
    ----------
    curve : CalibrationCurve
        With an example.
    table : Table
        Where it was read from, for the message.

    Raises
    ------
    TableFault
        If equation and example differ: one of the two was mistyped.
    """
    assert curve.example is not None
    r2star_per_s, wanted = curve.example
    given = curve.lic_mg_per_g(r2star_per_s)
    # Written so that a NaN is refused too; the last term lets exactly half a unit pass.
    if not abs(given - wanted) <= EXAMPLE_TOLERANCE_MG_PER_G + 1e-9:
        raise table.fault(
            f"at R2* {r2star_per_s:g} 1/s the equation gives {given:.4f} mg/g, the example says "
            f"{wanted:.4f}: coefficients, unit or example are mistyped."
        )
