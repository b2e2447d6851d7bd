"""``predicted-truncation``: truncation in which the fitted signal decides which echoes stay.

Echoes are dropped one by one from the end until the fit says of the last that it stands above the
noise. The choice no longer hangs on the noise of single echoes, which halves the bias of
`liverfe.fit.comparators.truncation` at moderate R2*.
"""

from __future__ import annotations

from liverfe.fit.comparators._packed import Array, Array32, Mask
from liverfe.fit.comparators._projected import projected_least_squares
from liverfe.fit.comparators.truncation import KEPT_ABOVE_SIGMA
from liverfe.fit.estimator import Estimator
from liverfe.fit.rows import DecayRows


def _fit(
    signal: Array32, echo_times_ms: Array, sigma: Array, n: int, usable: Mask | None
) -> DecayRows:
    del n  # the threshold is in sigma, whatever the floor
    return projected_least_squares(
        signal, echo_times_ms, sigma, usable, kept_above=KEPT_ABOVE_SIGMA, by_fit=True
    )


ESTIMATOR = Estimator(key="predicted-truncation", fit=_fit, noise_handling="truncation")
