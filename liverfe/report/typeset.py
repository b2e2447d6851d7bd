"""Data and template to PDF bytes: PDF/A-3a and PDF/UA-1, enforced by the typesetter."""

from __future__ import annotations

import datetime as dt
import importlib.resources
import json
import unicodedata
from collections.abc import Mapping
from typing import Any

import typst

from liverfe.report.printable import REPLACEMENT, printable, walk_text

__all__ = ["typeset"]

_STANDARDS: list[Any] = ["a-3a", "ua-1"]


def typeset(
    facts: Mapping[str, Any], *, drawings: Mapping[str, str], document: bytes, day: dt.date
) -> bytes:
    """Compile the report.

    Parameters
    ----------
    facts : mapping
        Everything that the template shows, as nested text. It reaches the template as JSON: no
        text in it is ever read as markup.
    drawings : mapping
        SVG text by name.
    document : bytes
        ``result.json``, attached as it is.
    day : date
        The document's date: the same input gives the same bytes.

    Returns
    -------
    bytes
        The PDF.

    Raises
    ------
    ValueError
        If `document` is not UTF-8, as JSON must be.
    typst.TypstError
        If the template itself is wrong.
    """
    attached = document.decode("utf-8")
    clean = walk_text(dict(facts), printable)
    try:
        return _compile(clean, facts, drawings, attached, day)
    except typst.TypstError:
        # Most likely a character that no font has: both standards forbid an empty glyph. The
        # typesetter itself is asked which, so this holds for whatever fonts it comes with.
        foreign = {char for char in _characters(clean) if not char.isascii()}
        unknown = {ord(char): REPLACEMENT for char in foreign if not _has_glyph(char)}
        if not unknown:
            raise
    clean = walk_text(clean, lambda text: text.translate(unknown))
    return _compile(clean, facts, drawings, attached, day)


def _compile(
    clean: dict[str, Any],
    facts: Mapping[str, Any],
    drawings: Mapping[str, str],
    attached: str,
    day: dt.date,
) -> bytes:
    template = importlib.resources.files("liverfe.report").joinpath("report.typ").read_bytes()
    data = {
        **clean,
        "replaced": _count_replacements(clean) > _count_replacements(facts),
        "day": [day.year, day.month, day.day],
        "drawn": sorted(drawings),
    }
    inputs = {"facts": json.dumps(data), "document": attached}
    inputs |= {f"drawing-{name}": svg for name, svg in drawings.items()}
    return _run(template, inputs)


def _count_replacements(tree: Mapping[str, Any]) -> int:
    return sum(text.count(REPLACEMENT) for text in _texts(tree))


def _run(source: bytes, inputs: dict[str, str]) -> bytes:
    # Fonts of the machine are shut out: another machine must give the same bytes.
    return typst.compile(
        source,
        ignore_system_fonts=True,
        sys_inputs=inputs,
        pdf_standards=_STANDARDS,
    )


_PROBE = b"""
#set document(title: "probe", date: datetime(year: 2000, month: 1, day: 1))
#set text(lang: "en", font: "Libertinus Serif")
#sys.inputs.text
"""


def _has_glyph(char: str) -> bool:
    # A combining mark is tried on a letter: alone it would be given a carrier of its own.
    text = f"a{char}" if unicodedata.combining(char) else char
    try:
        _run(_PROBE, {"text": text})
    except typst.TypstError:
        return False
    return True


def _characters(tree: Mapping[str, Any]) -> set[str]:
    return {char for text in _texts(tree) for char in text}


def _texts(tree: Mapping[str, Any]) -> list[str]:
    found: list[str] = []

    def collect(text: str) -> str:
        found.append(text)
        return text

    walk_text(dict(tree), collect)
    return found
