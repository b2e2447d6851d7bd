"""Suspects among the echo times: an echo that was lost, or images in another order."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.fit import noise_floor
from liverfe.regions.doubts.misfit import Misfit
from liverfe.regions.doubts.sample import Sample
from liverfe.regions.doubts.suspect import Suspect, first_look

Array = NDArray[np.float64]

_OVER_FLOOR = 1.1
"""An echo has an order by its signal while its mean is this many times the noise floor."""


def lost_echo(times_ms: Array, found: Misfit) -> Suspect:
    """Suspect that one echo is missing and each later one bears the time of the one before it.

    Of all places the one that explains most at first look; the first echo's loss would only move
    S0.
    """
    later = np.append(times_ms[1:], 2.0 * times_ms[-1] - times_ms[-2])

    def shifted(place: int) -> Array:
        return np.where(np.arange(len(times_ms)) < place, times_ms, later)

    def as_distortion(place: int) -> Suspect:
        delay = (shifted(place) - times_ms) * 1e-3
        return Suspect(
            kind="echo-lost",
            log_factor=lambda size, seen: -size[0] * seen.rate_per_s[:, None] * delay,
            low=0.0,
        )

    places = range(1, len(times_ms))
    best = min(places, key=lambda place: first_look(as_distortion(place), found))
    facts = {"before": f"{times_ms[best - 1]:.4g}", "after": f"{times_ms[best]:.4g}"}
    return Suspect(
        kind="echo-lost", echo_times_ms=shifted(best), n_sizes=0, choices=len(places), facts=facts
    )


def other_order(sample: Sample) -> Suspect | None:
    """Suspect that the images belong in order of falling signal; None where they stand so."""
    mean = sample.m.mean(axis=0)
    bright = mean > _OVER_FLOOR * noise_floor(sample.n_channels)
    by_signal = sorted(range(len(mean)), key=lambda e: (0, -mean[e]) if bright[e] else (1, e))
    order = np.array(by_signal, dtype=np.intp)
    wrong = np.flatnonzero(order != np.arange(len(order)))
    if not len(wrong):
        return None
    named = ", ".join(f"{sample.echo_times_ms[e]:.4g}" for e in wrong)
    return Suspect(
        kind="echoes-swapped", n_sizes=0, order=order, choices=len(order), facts={"te": named}
    )
