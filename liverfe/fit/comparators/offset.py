"""``offset``: ``S0 exp(-R2* TE) + C`` by least squares, C at least 0.

A free constant is no noise correction: the floor adds in quadrature, not linearly, so high R2*
reads too high (Feng 2013), and where the decay is slow the constant takes up what it likes.
"""

from __future__ import annotations

from liverfe.fit.comparators._packed import Array, Array32, Mask
from liverfe.fit.comparators._projected import projected_least_squares
from liverfe.fit.estimator import Estimator
from liverfe.fit.rows import DecayRows


def _fit(
    signal: Array32, echo_times_ms: Array, sigma: Array, n: int, usable: Mask | None
) -> DecayRows:
    del n  # the constant stands for the noise floor, whatever that is
    return projected_least_squares(signal, echo_times_ms, sigma, usable, with_offset=True)


ESTIMATOR = Estimator(
    key="offset", fit=_fit, noise_handling="offset", citations=("he2008", "feng2013")
)
