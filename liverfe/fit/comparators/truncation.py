"""``truncation``: least squares on the leading echoes above the noise, three at least (He 2008).

The noisy signal decides which echoes stay, so a lucky one stays and pulls: R2* reads low even
below the range where three echoes no longer stand above the noise.
"""

from __future__ import annotations

from liverfe.fit.comparators._packed import Array, Array32, Mask
from liverfe.fit.comparators._projected import projected_least_squares
from liverfe.fit.estimator import Estimator
from liverfe.fit.rows import DecayRows

KEPT_ABOVE_SIGMA = 2.5
"""Echoes are kept up to the first that is not above this many sigma."""


def _fit(
    signal: Array32, echo_times_ms: Array, sigma: Array, n: int, usable: Mask | None
) -> DecayRows:
    del n  # the threshold is in sigma, as published, whatever the floor
    return projected_least_squares(
        signal, echo_times_ms, sigma, usable, kept_above=KEPT_ABOVE_SIGMA
    )


ESTIMATOR = Estimator(
    key="truncation", fit=_fit, noise_handling="truncation", citations=("he2008", "feng2013")
)
