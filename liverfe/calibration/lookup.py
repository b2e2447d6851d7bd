"""Finding a curve or a band set by its key."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from typing import TypeVar

from liverfe.calibration.curve import CalibrationCurve
from liverfe.calibration.nouns import BandSet
from liverfe.errors import UsageError

Keyed = TypeVar("Keyed", CalibrationCurve, BandSet)


def find_by_key(key: str, among: Iterable[Keyed], *, what: str) -> Keyed:
    """Give the one of `among` whose key is `key`.

    Parameters
    ----------
    key : str
        As the user typed it.
    among : iterable of CalibrationCurve or BandSet
        What there is.
    what : str
        What messages call it.

    Returns
    -------
    CalibrationCurve or BandSet
        The one found.

    Raises
    ------
    UsageError
        If there is none: the nearest spelling and all keys are named.
    """
    by_key = {entry.key: entry for entry in among}
    if key in by_key:
        return by_key[key]
    near = difflib.get_close_matches(key.lower(), by_key, n=1)
    hint = f" Did you mean {near[0]!r}?" if near else ""
    raise UsageError(f"no {what} {key!r}.{hint} There are: {', '.join(by_key)}.")
