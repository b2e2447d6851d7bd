"""Echo times: are they there, in milliseconds, and enough of them."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from liverfe.errors import Finding, UsageError

SHORTEST_MS, LONGEST_MS = 0.3, 100.0
"""Echo times outside are no milliseconds, or no gradient-echo train for iron."""

_EVEN_SHARE = 0.05
"""Echo spacings that differ by less are even."""


def check_echo_times(times_ms: Sequence[float], *, where: str, tag: str) -> Iterator[Finding]:
    """Check the distinct echo times of one stack.

    Parameters
    ----------
    times_ms : sequence of float
        Ascending, in ms.
    where : str
        Series and file, for messages.
    tag : str
        Where they were stated, for messages.

    Yields
    ------
    Finding
        ``echo-times-out-of-range``, ``one-echo`` or ``echo-time-gap``.
    """
    bad = [time for time in times_ms if not SHORTEST_MS <= time <= LONGEST_MS]
    if bad:
        yield Finding.of(
            "echo-times-out-of-range",
            where=where,
            tag=tag,
            times=in_words(bad),
            shortest=f"{SHORTEST_MS:g}",
            longest=f"{LONGEST_MS:g}",
        )
    if len(times_ms) == 1:
        yield Finding.of("one-echo", where=where, tag=tag, time=f"{times_ms[0]:g}")
    gaps = np.diff(times_ms)
    if len(gaps) >= 4:
        step = float(np.median(gaps))
        n_steps = np.rint(gaps / step)
        is_even = np.abs(gaps / step - n_steps) < _EVEN_SHARE
        if is_even.all() and n_steps.max() > 1:
            after = int(np.argmax(n_steps))
            yield Finding.of(
                "echo-time-gap",
                where=where,
                before=f"{times_ms[after]:g}",
                after=f"{times_ms[after + 1]:g}",
                step=f"{step:g}",
            )


def in_words(times_ms: Sequence[float], most: int = 6) -> str:
    """List echo times for a message, in ms."""
    shown = ", ".join(f"{time:g}" for time in list(times_ms)[:most])
    return f"{shown}, ..." if len(times_ms) > most else shown


def as_given(echo_times_ms: Sequence[float] | None) -> tuple[float, ...] | None:
    """Take the echo times that a user gave.

    Returns
    -------
    tuple of float or None
        Strictly ascending, in ms; None where none were given.

    Raises
    ------
    UsageError
        If they do not ascend or are not positive numbers.
    """
    if echo_times_ms is None:
        return None
    times = tuple(float(time) for time in echo_times_ms)
    if not times or not np.isfinite(times).all() or min(times) <= 0:
        raise UsageError("echo times must be positive numbers in ms, for example 1.1,2.0,2.9.")
    if (np.diff(times) <= 0).any():
        raise UsageError(
            f"echo times must ascend, in the order of the echoes: {in_words(times)} does not."
        )
    return times


def given_field(field_strength_t: float | None) -> float | None:
    """Take the field strength that a user gave; UsageError unless it is a positive number."""
    if field_strength_t is None:
        return None
    if not np.isfinite(field_strength_t) or field_strength_t <= 0:
        raise UsageError("the field strength must be a positive number in T, for example 1.5.")
    return float(field_strength_t)
