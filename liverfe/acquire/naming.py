"""How a file is named in a message: enough to find it, without saying whose it is."""

from __future__ import annotations

import re
from collections.abc import Iterable
from pathlib import Path

_SHORTEST_WORD = 3
"""Parts of a name shorter than this are in every file name and say nothing."""


def shown_name(path: Path, person: Iterable[str] = ()) -> str:
    """Name a file for a message.

    Folders are left away, since they are often named after a patient, and so is every part of
    the file's own name that is part of the patient's name or number.

    Parameters
    ----------
    path : Path
        The file.
    person : iterable of str
        Patient's name and ID as in the file.

    Returns
    -------
    str
        The file's own name, a personal part replaced by ``...``.
    """
    name = path.name
    words = {
        word
        for text in person
        for word in re.split(r"[\W_]+", text)
        if len(word) >= _SHORTEST_WORD and not (word.isdigit() and len(word) < 5)
    }
    for word in sorted(words, key=len, reverse=True):
        name = re.sub(re.escape(word), "...", name, flags=re.IGNORECASE)
    return name
