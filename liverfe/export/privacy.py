"""Names stay out: texts that came from outside are searched for the patient before they leave.

Keys, numbers and our own sentences name nobody. But a region's name, a scanner's label or a
description of left-out files was typed by somebody, and may hold a name, a number or a birth date.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable

from liverfe.echoes import EchoStack, Subject
from liverfe.wording.export import WITHHELD

__all__ = ["region_names_withheld", "withholder"]

_SHORTEST_WORD = 3
"""Parts of a name shorter than this (initials, particles) are innocent when they stand alone."""

_SHORTEST_IN_PAIR = 2
"""Two parts side by side may be shorter: together they are the name."""

_SHORTEST_NUMBER = 4
"""A patient ID shorter than this cannot be told from a count or an echo time."""

_DISTINCT_NUMBER = 6
"""A patient ID at least this long is taken out even where letters or digits touch it."""


def withholder(stack: EchoStack | None) -> Callable[[str], str]:
    """Make the function that takes one patient out of a text.

    Parameters
    ----------
    stack : EchoStack or None
        Whose `subject` must not show; None where no file gave one.

    Returns
    -------
    callable
        str -> str: whole name (its parts in any order), patient ID, study UID and birth date are
        replaced by `liverfe.wording.export.WITHHELD`; characters that cannot be printed are
        replaced by a space.
    """
    pattern = _pattern(_whole_names(stack.subject) + _numbers(stack.subject)) if stack else None

    def withhold(text: str) -> str:
        printable = "".join(char if char.isprintable() else " " for char in text)
        return pattern.sub(WITHHELD, printable) if pattern else printable

    return withhold


def region_names_withheld(names: Iterable[str], stack: EchoStack | None) -> dict[str, str]:
    """Map each region's name to the one that may leave; they stay different from each other.

    A region's name is typed freely, so single parts of the patient's name are taken out of it too
    (unless the files say that they are synthetic: then the "patient" is nobody).

    Parameters
    ----------
    names : iterable of str
        Names of all regions.
    stack : EchoStack or None
        Whose `subject` must not show.

    Returns
    -------
    dict
        Name as drawn -> name as exported.
    """
    withhold = withholder(stack)
    parts = None
    if stack and not stack.acquisition.is_synthetic:
        parts = _pattern([_standing_free(re.escape(p)) for p in _name_parts(stack.subject)])
    leaving: dict[str, str] = {}
    for name in names:
        clean = withhold(name)
        clean = parts.sub(WITHHELD, clean) if parts else clean
        candidate, number = clean, 1
        while candidate in leaving.values():
            number += 1
            candidate = f"{clean} {number}"
        leaving[name] = candidate
    return leaving


def _pattern(terms: list[str]) -> re.Pattern[str] | None:
    """One pattern for all terms, longest first."""
    if not terms:
        return None
    return re.compile("|".join(sorted(set(terms), key=len, reverse=True)), re.IGNORECASE)


def _standing_free(term: str) -> str:
    """Let a term match only where no letter or digit touches it; an underscore may."""
    return rf"(?<![^\W_]){term}(?![^\W_])"


def _name_parts(subject: Subject, shortest: int = _SHORTEST_WORD) -> list[str]:
    # DICOM parts a person name's components by ^ and its representations by =.
    parts = re.split(r"[\^=\s,]+", subject.patient_name)
    # Words of ideographic scripts are a letter shorter, yet as distinct.
    return [part for part in parts if len(part) >= shortest - (not part.isascii())]


def _whole_names(subject: Subject) -> list[str]:
    parts = [re.escape(part) for part in _name_parts(subject, _SHORTEST_IN_PAIR)]
    pairs = [rf"{a}[\W_]{{0,3}}{b}" for a in parts for b in parts if a != b]
    whole = subject.patient_name.strip()
    if not re.fullmatch(r"\w*", whole):  # a name of one word is left to `region_names_withheld`
        pairs.append(re.escape(whole))
    return [_standing_free(pair) for pair in pairs]


def _numbers(subject: Subject) -> list[str]:
    terms = []
    for number in (subject.patient_id.strip(), subject.study_uid.strip()):
        if len(number) >= _DISTINCT_NUMBER:
            terms.append(re.escape(number))
        elif len(number) >= _SHORTEST_NUMBER:
            terms.append(_standing_free(re.escape(number)))
    if subject.birth_date:
        year, month, day = f"{subject.birth_date:%Y %m %d}".split()
        for first, last in ((year, day), (day, year)):
            terms.append(_standing_free(rf"{first}[-./]?{month}[-./]?{last}"))
    return terms
