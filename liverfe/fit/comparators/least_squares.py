"""``least-squares``: ``S0 exp(-R2* TE)`` by plain least squares, S0 projected out.

Precise, and pulled towards the noise floor: high R2* reads low.
"""

from __future__ import annotations

from liverfe.fit.comparators._packed import Array, Array32, Mask
from liverfe.fit.comparators._projected import projected_least_squares
from liverfe.fit.estimator import Estimator
from liverfe.fit.rows import DecayRows


def _fit(
    signal: Array32, echo_times_ms: Array, sigma: Array, n: int, usable: Mask | None
) -> DecayRows:
    del n  # it does not look at the noise
    return projected_least_squares(signal, echo_times_ms, sigma, usable)


ESTIMATOR = Estimator(key="least-squares", fit=_fit, noise_handling="none")
