"""Single values out of a data set, read from their bytes: fast, and deaf to malformed headers.

A value that is absent, empty or no number gives None or an empty tuple, never an error: what its
absence means is for the caller to say.
"""

from __future__ import annotations

import math
import struct
from datetime import date
from functools import lru_cache
from typing import Any

from pydicom.dataelem import RawDataElement
from pydicom.dataset import Dataset

_BINARY = {"US": "H", "SS": "h", "UL": "I", "SL": "i", "FL": "f", "FD": "d"}


class Elements:
    """The elements of a data set or of a sequence's item, by tag.

    pydicom turns every tag that it is asked for into an object of its own; with a hundred tags
    in hundreds of files that is half the time of a survey. Here they are plain whole numbers.
    """

    __slots__ = ("_dataset", "raw")

    def __init__(self, dataset: Dataset | None = None) -> None:
        self._dataset = dataset
        self.raw: dict[int, Any] = (
            {} if dataset is None else {int(tag): element for tag, element in dataset.items()}
        )

    def __contains__(self, tag: int) -> bool:
        return tag in self.raw

    def __len__(self) -> int:
        return len(self.raw)

    def items_of(self, tag: int) -> list[Elements]:
        """The items of a sequence; empty where it is absent or no sequence."""
        if tag not in self.raw or self._dataset is None:
            return []
        value = self._dataset[tag].value
        if not value or isinstance(value, (bytes, str)):
            return []
        return [Elements(found) for found in value]


def text(elements: Elements, tag: int) -> str:
    """Read one plain (ASCII) value; all values, backslashes kept, where there are several."""
    value = _value(elements, tag)
    if value is None:
        return ""
    if isinstance(value, bytes):
        return _plain(value)
    if isinstance(value, str):
        return value.strip()
    return "\\".join(str(part) for part in value) if _is_many(value) else str(value)


def texts(elements: Elements, tag: int) -> tuple[str, ...]:
    """Read all values of a plain (ASCII) element."""
    whole = text(elements, tag)
    return tuple(part.strip() for part in whole.split("\\")) if whole else ()


def numbers(elements: Elements, tag: int, *, binary: str = "") -> tuple[float, ...]:
    """Read all values of a numeric element; empty unless every one is a finite number.

    Parameters
    ----------
    elements : Elements
        Where to read.
    tag : int
        Which element.
    binary : str
        The element's value representation where it is stored in binary and the transfer syntax
        does not say so (``US``, ``SS``, ``FL``, ``FD``); empty for decimal text.
    """
    element = elements.raw.get(tag)
    if element is None or element.value is None:
        return ()
    value: Any = element.value
    if isinstance(value, bytes):
        stated = element.VR if isinstance(element, RawDataElement) else None
        kind = _BINARY.get(binary if stated in (None, "UN") else stated, "")
        if kind:
            little = getattr(element, "is_little_endian", True)
            return _binary_numbers(value, "<" if little else ">", kind)
        return _decimal_numbers(value)
    parts = list(value) if _is_many(value) else [value]
    try:
        found = tuple(float(part) for part in parts)
    except (TypeError, ValueError):
        return ()
    return found if all(map(math.isfinite, found)) else ()


def number(elements: Elements, tag: int, *, binary: str = "") -> float | None:
    """Read the first value of a numeric element; see `numbers`."""
    found = numbers(elements, tag, binary=binary)
    return found[0] if found else None


def whole(elements: Elements, tag: int, *, binary: str = "") -> int | None:
    """Read a whole number; see `numbers`."""
    found = number(elements, tag, binary=binary)
    return int(found) if found is not None else None


def item(elements: Elements, tag: int) -> Elements | None:
    """Read the first item of a sequence, or None."""
    found = elements.items_of(tag)
    return found[0] if found else None


def private(elements: Elements, group: int, element: int, creator: str) -> int | None:
    """Find the tag of a private element by its creator's block; None where it is absent."""
    for block in range(0x10, 0x20):
        if (group << 16) | block in elements and text(elements, (group << 16) | block) == creator:
            tag = (group << 16) | (block << 8) | element
            return tag if tag in elements else None
    return None


def day(value: str) -> date | None:
    """Read a DICOM date (YYYYMMDD); None where it is none."""
    try:
        return date(int(value[:4]), int(value[4:6]), int(value[6:8]))
    except ValueError:
        return None


def seconds_of_day(value: str) -> float | None:
    """Read a DICOM time (HHMMSS.FFFFFF) as seconds since midnight; None where it is none."""
    try:
        hours, minutes = int(value[:2]), int(value[2:4] or 0)
        return 3600.0 * hours + 60.0 * minutes + float(value[4:] or 0)
    except ValueError:
        return None


def _value(elements: Elements, tag: int) -> Any:
    element = elements.raw.get(tag)
    return None if element is None else element.value


def _is_many(value: Any) -> bool:
    return hasattr(value, "__iter__") and not isinstance(value, (str, bytes))


@lru_cache(maxsize=4096)
def _plain(value: bytes) -> str:
    return value.decode("latin-1").strip(" \0\t\r\n")


@lru_cache(maxsize=4096)
def _decimal_numbers(value: bytes) -> tuple[float, ...]:
    try:
        found = tuple(float(part) for part in _plain(value).split("\\"))
    except ValueError:
        return ()
    return found if all(map(math.isfinite, found)) else ()


@lru_cache(maxsize=4096)
def _binary_numbers(value: bytes, order: str, kind: str) -> tuple[float, ...]:
    n, rest = divmod(len(value), struct.calcsize(kind))
    if rest or not n:
        return ()
    found = tuple(float(part) for part in struct.unpack(f"{order}{n}{kind}", value))
    return found if all(map(math.isfinite, found)) else ()
