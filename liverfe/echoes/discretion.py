"""What names a subject: the patterns by which texts from outside are searched before they leave.

Keys, numbers and our own sentences name nobody. But a region's name, a scanner's label or a
description of left-out files was typed by somebody, and may hold a name, a number or a birth date.
"""

from __future__ import annotations

import re

from liverfe.echoes.acquisition import Subject

_SHORTEST_WORD = 3
"""Parts of a name shorter than this (initials, particles) are innocent when they stand alone."""

_SHORTEST_IN_PAIR = 2
"""Two parts side by side may be shorter: together they are the name."""

_SHORTEST_NUMBER = 4
"""A patient ID shorter than this cannot be told from a count or an echo time."""

_DISTINCT_NUMBER = 6
"""A patient ID at least this long is taken out even where letters or digits touch it."""


def naming_pattern(subject: Subject, *, single_parts: bool = False) -> re.Pattern[str] | None:
    """Make the pattern that finds a subject in a text.

    Parameters
    ----------
    subject : Subject
        Who must not show.
    single_parts : bool
        Whether a part of the name counts on its own: for texts that were typed freely, where the
        sentences of others would lose innocent words.

    Returns
    -------
    re.Pattern or None
        Matches the whole name (its parts in any order), patient ID, study UID and birth date, in
        any case; None where the subject has none of them.
    """
    terms = _whole_names(subject) + _numbers(subject)
    if single_parts:
        terms += [_standing_free(re.escape(part)) for part in _name_parts(subject)]
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
    return [part for part in parts if part and len(part) >= shortest - (not part.isascii())]


def _whole_names(subject: Subject) -> list[str]:
    parts = [re.escape(part) for part in _name_parts(subject, _SHORTEST_IN_PAIR)]
    pairs = [rf"{a}[\W_]{{0,3}}{b}" for a in parts for b in parts if a != b]
    whole = subject.patient_name.strip()
    if not re.fullmatch(r"\w*", whole):  # a name of one word counts among single parts only
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
