"""Arguments that are numbers, read from text with care for their unit."""

from __future__ import annotations

from liverfe.errors import UsageError
from liverfe.wording.command_line import ECHO_TIMES_IMPOSSIBLE, ECHO_TIMES_UNREADABLE

_POSSIBLE_MS = (0.3, 100.0)
"""Echo times of a gradient echo; seconds typed as milliseconds lie below (faults sheet, B23)."""


def read_echo_times(text: str | None) -> tuple[float, ...] | None:
    """Read a list of echo times.

    Parameters
    ----------
    text : str or None
        Numbers in ms, comma-separated.

    Returns
    -------
    tuple of float or None
        In the order given, ms; None where nothing was given.

    Raises
    ------
    UsageError
        If something is not a number, or cannot be an echo time in ms.
    """
    if text is None:
        return None
    try:
        times = tuple(float(part) for part in text.split(","))
    except ValueError:
        raise UsageError(ECHO_TIMES_UNREADABLE.format(text=text)) from None
    low, high = _POSSIBLE_MS
    for time in times:
        if not low <= time <= high:
            raise UsageError(ECHO_TIMES_IMPOSSIBLE.format(text=text, value=time))
    return times
