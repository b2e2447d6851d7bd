"""Suspects among the echoes: one that is off, some that moved, odd against even ones."""

from __future__ import annotations

from collections.abc import Iterator
from math import comb

import numpy as np
from numpy.typing import NDArray

from liverfe.regions.doubts.misfit import Misfit
from liverfe.regions.doubts.suspect import Suspect, first_look

Array = NDArray[np.float64]

_MOST_APART = 3
"""Up to this many echoes that do not stand side by side may each be off by a size of their own."""


def one_echo(times_ms: Array) -> Iterator[Suspect]:
    """Suspect each echo alone: its signal is too high or too low by one factor."""
    for e in range(len(times_ms)):
        yield _scaled(times_ms, "echo-disagrees", np.eye(len(times_ms))[[e]], (e,), len(times_ms))


def neighbours(times_ms: Array) -> Iterator[Suspect]:
    """Suspect echoes side by side: all are off by one factor, as by a breath or a gain."""
    n = len(times_ms)
    choices = (n - 1) * (n - 2) // 2
    for first in range(1, n - 1):
        for last in range(first + 1, n):
            inside = np.zeros(n)
            inside[first : last + 1] = 1.0
            # As seen from R2*, some echoes too low are the others too high: name the fewer.
            block = tuple(range(first, last + 1))
            rest = tuple(e for e in range(n) if e not in block)
            if min(len(block), len(rest)) >= 2:
                fewer = block if len(block) <= len(rest) else rest
                yield _scaled(times_ms, "echoes-disagree", inside[None, :], fewer, choices)


def scattered(times_ms: Array, found: Misfit) -> Iterator[Suspect]:
    """Suspect two or three echoes anywhere, picked one after the other as each explains most."""
    n = len(times_ms)
    unit = np.eye(n)
    picked: tuple[int, ...] = ()
    for _ in range(_MOST_APART):
        trials = [
            _scaled(
                times_ms, "echoes-disagree", unit[[*picked, e]], (*picked, e),
                comb(n, len(picked) + 1),
            )
            for e in range(n)
            if e not in picked
        ]  # fmt: skip
        looks = [first_look(trial, found) for trial in trials]
        best = int(np.argmin(looks))
        if not np.isfinite(looks[best]):
            return
        picked = tuple(trials[best].facts["echoes"])
        if len(picked) > 1:
            yield trials[best]


def alternating(times_ms: Array) -> Suspect:
    """Suspect a readout that runs forth and back: odd echoes stronger than even ones."""
    signs = 0.5 * (-1.0) ** np.arange(len(times_ms))
    return Suspect(kind="echoes-alternate", log_factor=lambda size, _: size[0] * signs)


def _scaled(
    times_ms: Array, kind: str, rows: Array, echoes: tuple[int, ...], choices: int
) -> Suspect:
    named = ", ".join(f"{times_ms[e]:.4g}" for e in sorted(echoes))
    return Suspect(
        kind=kind,
        n_sizes=len(rows),
        log_factor=lambda sizes, _: sizes @ rows,
        choices=choices,
        facts={"te": named, "echoes": echoes},
    )
