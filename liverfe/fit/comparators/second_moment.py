"""``second-moment``: least squares of M² on its expectation, ``S0² exp(-2 R2* TE) + 2 n sigma²``.

Right on average, for the second moment is exact (Feng 2013); unweighted, as published, it scatters
half as much again at high R2*, because the variance of M² grows with the signal.
"""

from __future__ import annotations

from liverfe.fit.comparators._packed import Array, Array32, Mask, fit_each
from liverfe.fit.comparators._projected import fit_second_moments
from liverfe.fit.engine import no_signal_first, no_signal_powers
from liverfe.fit.estimator import Estimator
from liverfe.fit.rows import DecayRows
from liverfe.fit.signal_models import max_rate_per_ms


def _fit(
    signal: Array32, echo_times_ms: Array, sigma: Array, n: int, usable: Mask | None
) -> DecayRows:
    furthest = max_rate_per_ms(echo_times_ms) * float(echo_times_ms[0])
    return fit_each(
        fit_second_moments, signal, echo_times_ms, sigma, usable,
        n, no_signal_powers(len(echo_times_ms), n), no_signal_first(n), furthest,
    )  # fmt: skip


ESTIMATOR = Estimator(
    key="second-moment", fit=_fit, noise_handling="corrected", citations=("feng2013",)
)
