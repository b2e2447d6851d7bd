"""Text from outside, made fit to print: shown as text, whatever it holds.

Names of patients, regions, scanners and files come from files. They reach the template as data, so
no markup in them is ever read; what remains are characters that have no shape on paper, characters
that would reorder the line around them, and names without end.
"""

from __future__ import annotations

import unicodedata
from collections.abc import Callable
from typing import Any

__all__ = ["REPLACEMENT", "person_name", "printable", "shortened", "walk_text"]

REPLACEMENT = "?"
"""Stands for each character that cannot be printed."""

_INVISIBLE = {"\u200c", "\u200d", "\ufeff", "\u00ad"}
"""Joiners, byte order mark and soft hyphen have no shape of their own: left out, not replaced."""

_UNPRINTABLE = {"Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"}
"""Unicode categories without a shape: controls, marks that turn the writing direction of what
follows (a number could be shown backwards), lone surrogates, private and unassigned codes."""


def printable(text: str) -> str:
    """Make a text from outside fit to print.

    Parameters
    ----------
    text : str
        Anything.

    Returns
    -------
    str
        One line; white space of any kind is one space, what cannot be printed is `REPLACEMENT`.

    Examples
    --------
    >>> printable("a  b\\x07")
    'a b?'
    """
    shapes = (char for char in " ".join(text.rstrip("\x00").split()) if char not in _INVISIBLE)
    return "".join(
        REPLACEMENT if unicodedata.category(char) in _UNPRINTABLE else char for char in shapes
    )


def shortened(text: str, most: int) -> str:
    """Cut a text to `most` characters, the last of them an ellipsis where it was longer."""
    return text if len(text) <= most else text[: most - 1] + "…"


def person_name(text: str) -> str:
    """Write a DICOM person name as people read it.

    Parameters
    ----------
    text : str
        DICOM value of kind PN: ``Family^Given^Middle^Prefix^Suffix``, in up to three groups
        (alphabetic, ideographic, phonetic) parted by ``=`` (DICOM PS3.5, 6.2).

    Returns
    -------
    str
        ``Family, Given Middle …`` of the first group that is not empty.

    Examples
    --------
    >>> person_name("Synthetic^Liver^^Dr")
    'Synthetic, Liver Dr'
    >>> person_name("one word")
    'one word'
    """
    group = next((part for part in text.split("=") if part.strip(" ^")), "")
    family, *rest = group.split("^")
    others = " ".join(part.strip() for part in rest if part.strip())
    return ", ".join(part for part in (family.strip(), others) if part)


def walk_text(tree: Any, change: Callable[[str], str]) -> Any:
    """Apply `change` to every string in nested lists and dictionaries (not to their keys)."""
    if isinstance(tree, str):
        return change(tree)
    if isinstance(tree, dict):
        return {key: walk_text(value, change) for key, value in tree.items()}
    if isinstance(tree, list):
        return [walk_text(value, change) for value in tree]
    return tree
