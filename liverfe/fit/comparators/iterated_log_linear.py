"""``iterated-log-linear``: the line through ln M, weighted by the square of the fitted signal.

The weights follow the fit until both stand still. Noise no longer moves the weights of single
echoes, and those on the floor weigh next to nothing: far less bias than with weights M².
"""

from __future__ import annotations

from liverfe.fit.comparators._line import FITTED, fit_lines
from liverfe.fit.comparators._packed import Array, Array32, Mask, fit_each
from liverfe.fit.estimator import Estimator
from liverfe.fit.rows import DecayRows


def _fit(
    signal: Array32, echo_times_ms: Array, sigma: Array, n: int, usable: Mask | None
) -> DecayRows:
    del n  # it does not look at the noise
    return fit_each(fit_lines, signal, echo_times_ms, sigma, usable, FITTED)


ESTIMATOR = Estimator(key="iterated-log-linear", fit=_fit, noise_handling="none")
