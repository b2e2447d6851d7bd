"""Names stay out of files: texts that came from outside are searched for the patient first."""

from __future__ import annotations

from collections.abc import Callable, Iterable

from liverfe.echoes import EchoStack, naming_pattern
from liverfe.wording.export import WITHHELD

__all__ = ["region_names_withheld", "withholder"]


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
    pattern = naming_pattern(stack.subject) if stack else None

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
        parts = naming_pattern(stack.subject, single_parts=True)
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
