"""``first-moment``: least squares of M on its expectation under noise (Feng 2013).

Unweighted, as published. The variance of a magnitude changes little: from sigma² at high SNR down
to 0.43 sigma² in Rician noise alone, where the expectation hardly moves with the signal and an
echo counts for little anyway. So equal weights cost 1 to 4 % of the standard error;
`liverfe.fit.comparators.weighted_first_moment` gets them back.
"""

from __future__ import annotations

from liverfe.fit.comparators._first_moment import first_moment_least_squares
from liverfe.fit.comparators._packed import Array, Array32, Mask
from liverfe.fit.estimator import Estimator
from liverfe.fit.rows import DecayRows


def _fit(
    signal: Array32, echo_times_ms: Array, sigma: Array, n: int, usable: Mask | None
) -> DecayRows:
    return first_moment_least_squares(signal, echo_times_ms, sigma, n, usable, weighted=False)


ESTIMATOR = Estimator(
    key="first-moment", fit=_fit, noise_handling="corrected", is_for_reports=True,
    citations=("feng2013",),
)  # fmt: skip
