"""``weighted-log-linear``: the line through ln M, each echo weighted by M².

At high SNR ``sigma² / M²`` is the variance of ln M. The measured M hangs together with its own
error: an echo that reads high also weighs more, so it reads low even where there is no floor yet.
`liverfe.fit.comparators.iterated_log_linear` mends that.
"""

from __future__ import annotations

from liverfe.fit.comparators._line import MEASURED, fit_lines
from liverfe.fit.comparators._packed import Array, Array32, Mask, fit_each
from liverfe.fit.estimator import Estimator
from liverfe.fit.rows import DecayRows


def _fit(
    signal: Array32, echo_times_ms: Array, sigma: Array, n: int, usable: Mask | None
) -> DecayRows:
    del n  # it does not look at the noise
    return fit_each(fit_lines, signal, echo_times_ms, sigma, usable, MEASURED)


ESTIMATOR = Estimator(key="weighted-log-linear", fit=_fit, noise_handling="none")
