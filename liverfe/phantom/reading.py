"""From a recipe's TOML to a `Recipe`: each mistake is refused by the path of its key."""

from __future__ import annotations

import difflib
import math
from collections.abc import Mapping
from datetime import date
from typing import Any

from liverfe.errors import UsageError

__all__ = ["RecipeTable"]


class RecipeTable:
    """One table of a recipe, read key by key; `close` refuses keys that nobody asked for.

    Parameters
    ----------
    values : mapping
        As `tomllib` gives it.
    where : str
        Path of this table for messages, for example ``recipe demo: noise``.
    """

    def __init__(self, values: Mapping[str, Any], where: str) -> None:
        self._values = values
        self._where = where
        self._asked: set[str] = set()

    def __contains__(self, key: str) -> bool:
        return key in self._values

    @property
    def keys(self) -> tuple[str, ...]:
        """Names of all keys, in the file's order."""
        return tuple(self._values)

    def refuse(self, key: str, what: str) -> UsageError:
        """Return the error to raise about `key`."""
        return UsageError(f"{self._where}{key}: {what}")

    def close(self) -> None:
        """Refuse keys that no reader knows: a misspelt key must not fall back to a default."""
        for key in self._values:
            if key not in self._asked:
                near = difflib.get_close_matches(key, self._asked, n=1)
                hint = f"did you mean {near[0]!r}?" if near else f"known: {sorted(self._asked)}"
                raise self.refuse(key, f"unknown key; {hint}")

    def _take(self, key: str, default: Any) -> Any:
        self._asked.add(key)
        if key in self._values:
            return self._values[key]
        if default is _MISSING:
            raise self.refuse(key, "is missing")
        return default

    def text(self, key: str, *, default: Any = None) -> str:
        """Read a non-empty text."""
        value = self._take(key, _MISSING if default is None else default)
        if not isinstance(value, str) or (default is None and not value.strip()):
            raise self.refuse(key, f"must be a text, not {value!r}")
        return value.strip()

    def choice(self, key: str, options: tuple[str, ...], *, default: str | None = None) -> str:
        """Read one of some words."""
        value = self.text(key, default=default)
        if value not in options:
            raise self.refuse(key, f"must be one of {', '.join(options)}, not {value!r}")
        return value

    def date(self, key: str, *, default: date) -> date:
        """Read a calendar date, written without quotes."""
        value = self._take(key, default)
        if type(value) is not date:
            raise self.refuse(key, f"must be a date like 2031-04-02 without quotes, not {value!r}")
        return value

    def integer(self, key: str, *, low: int, high: int, default: int | None = None) -> int:
        """Read a whole number from `low` to `high`."""
        value = self._take(key, _MISSING if default is None else default)
        if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
            raise self.refuse(key, f"must be a whole number from {low} to {high}, not {value!r}")
        return value

    def number(
        self,
        key: str,
        *,
        above: float = -math.inf,
        at_least: float = -math.inf,
        below: float = math.inf,
        default: float | None = None,
    ) -> float:
        """Read a finite number strictly between `above` and `below`, and not under `at_least`."""
        value = self._number(key, self._take(key, _MISSING if default is None else default))
        if not above < value < below or value < at_least:
            limits = {"above": above, "at least": at_least, "below": below}
            words = " and ".join(f"{w} {v:g}" for w, v in limits.items() if math.isfinite(v))
            raise self.refuse(key, f"must be {words}, not {value:g}")
        return value

    def optional_number(self, key: str, *, above: float) -> float | None:
        """Read a finite number above `above`, or None where the key is absent."""
        return self.number(key, above=above) if key in self else self._take(key, None)

    def numbers(
        self, key: str, *, count: int | None = None, above: float = -math.inf, default: Any = None
    ) -> tuple[float, ...]:
        """Read a list of finite numbers, `count` of them where it is given."""
        values = self._take(key, _MISSING if default is None else default)
        if not isinstance(values, list | tuple) or not values:
            raise self.refuse(key, f"must be a list of numbers, not {values!r}")
        if count is not None and len(values) != count:
            raise self.refuse(key, f"must hold {count} numbers, not {len(values)}")
        checked = tuple(self._number(f"{key}[{i}]", value) for i, value in enumerate(values))
        for i, value in enumerate(checked):
            if value <= above:
                raise self.refuse(f"{key}[{i}]", f"must be above {above:g}, not {value:g}")
        return checked

    def optional_integer(self, key: str, *, low: int, high: int) -> int | None:
        """Read a whole number from `low` to `high`, or None where the key is absent."""
        return self.integer(key, low=low, high=high) if key in self else self._take(key, None)

    def integers(self, key: str, *, low: int, high: int, default: Any = None) -> tuple[int, ...]:
        """Read a non-empty list of whole numbers from `low` to `high`."""
        values = self._take(key, _MISSING if default is None else default)
        if values is default:
            return tuple(values)
        if not isinstance(values, list) or not values:
            raise self.refuse(key, f"must be a list of whole numbers, not {values!r}")
        for i, value in enumerate(values):
            if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
                raise self.refuse(
                    f"{key}[{i}]", f"must be a whole number from {low} to {high}, not {value!r}"
                )
        return tuple(values)

    def texts(self, key: str) -> tuple[str, ...]:
        """Read a non-empty list of texts."""
        values = self._take(key, _MISSING)
        if not values or not isinstance(values, list) or {type(v) for v in values} != {str}:
            raise self.refuse(key, f"must be a list of texts, not {values!r}")
        return tuple(values)

    def table(self, key: str, *, default: Mapping[str, Any] | None = None) -> RecipeTable:
        """Open the table below `key`."""
        value = self._take(key, _MISSING if default is None else default)
        if not isinstance(value, Mapping):
            raise self.refuse(key, f"must be a table, not {value!r}")
        return RecipeTable(value, f"{self._where}{key}.")

    def tables(self, key: str, *, default: Any = None) -> tuple[RecipeTable, ...]:
        """Open each table of the array of tables below `key`."""
        values = self._take(key, _MISSING if default is None else default)
        if not isinstance(values, list) or not all(isinstance(v, Mapping) for v in values):
            raise self.refuse(key, "must be an array of tables: [[...]]")
        return tuple(
            RecipeTable(value, f"{self._where}{key}[{i}].") for i, value in enumerate(values)
        )

    def _number(self, key: str, value: Any) -> float:
        if type(value) not in (int, float) or not math.isfinite(value):
            raise self.refuse(key, f"must be a finite number, not {value!r}")
        return float(value)


_MISSING = object()
"""Stands for `no default`."""
