"""The likelihood of one voxel and its derivatives, for compiled code: any signal model.

No SciPy inside; the noise equations come in as tables (`liverfe.fit.tables`), the signal model as
an argument (`liverfe.fit.signal_models`). Echo times are in ms and R2* in 1/ms; amplitudes in units
of sigma.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit
from numpy.typing import NDArray

from liverfe.fit.signal_models import SignalModel, fill_slopes, log_amplitude
from liverfe.fit.tables import EXCESS, INFORMATION, KERNEL, RATIO, KernelTables

Array = NDArray[np.float64]

_DARKEST = 0.01
"""Magnitudes below this many sigma count as it in the log-likelihood: a stored zero has none."""

_INSIDE: dict[str, Any] = {"no_cpython_wrapper": True, "no_cfunc_wrapper": True}
inner = njit(error_model="numpy", **_INSIDE)
"""For functions that only compiled code calls: without doors for others they compile in half the
time, and what calls them keeps them in its own cache."""


(
    M, USED, AMPLITUDES, TRIAL, P, P_TRIAL, P_BEST, P_SIMPLE, SLOPES, SCORE, STEP, HELD, INFO,
) = range(13)  # fmt: skip
"""Rows of the work array of one voxel, which is one array because many compile slowly: magnitudes
in sigma, whether they count (1 or 0), amplitudes at the point reached and at the one that is tried;
parameters there, at the best point so far and at that of one exponential; slopes of ln A, score,
step, whether a parameter is held at a bound. From INFO on the information, one row a parameter, and
after that its Cholesky factor."""


def work_array(n_echoes: int, n_parameters: int) -> Array:
    """Room for one voxel of so many echoes and parameters."""
    return np.zeros((INFO + 2 * n_parameters, max(n_echoes, n_parameters)))


@inner
def look_up_one(noise: KernelTables, which: int, u: float) -> float:
    """One value from cubic pieces."""
    n_pieces = noise.pieces.shape[1]
    x = u * n_pieces
    i = min(int(x), n_pieces - 1)
    t = x - i
    value: float = noise.pieces[which, i, 0] + t * (
        noise.pieces[which, i, 1] + t * (noise.pieces[which, i, 2] + t * noise.pieces[which, i, 3])
    )
    return value


@inner
def copy(work: Array, source: int, target: int) -> None:
    """Copy a row of the work array."""
    for k in range(work.shape[1]):
        work[target, k] = work[source, k]


@inner
def log_likelihood(
    model: SignalModel, noise: KernelTables, n_echoes: int, work: Array, p: int, amplitudes: int
) -> float:
    """Log-likelihood up to terms in the data alone, for the parameters in row `p`.

    Leaves the amplitudes in row `amplitudes`.
    """
    total = 0.0
    for e in range(n_echoes):
        a = np.exp(log_amplitude(model, work, p, e))
        work[amplitudes, e] = a
        if work[USED, e] > 0.0:
            m = work[M, e]
            z = m * a
            total += look_up_one(noise, KERNEL, z / (z + noise.product_scale))
            total -= (noise.n - 0.5) * np.log(z + noise.product_scale) + 0.5 * (a - m) ** 2
    return total


@inner
def data_terms(work: Array, n_echoes: int, sigma: float, n: int) -> float:
    """Terms of the log-likelihood in the data alone, density per signal unit."""
    total = 0.0
    for e in range(n_echoes):
        if work[USED, e] > 0.0:
            total += (2.0 * n - 1.0) * np.log(max(work[M, e], _DARKEST)) - np.log(sigma)
    return total


@inner
def score_and_information(
    model: SignalModel, noise: KernelTables, n_echoes: int, n_p: int, work: Array, p: int
) -> None:
    """Score and Fisher information for the parameters in row `p`, at the amplitudes reached."""
    for k in range(n_p):
        work[SCORE, k] = 0.0
        for j in range(n_p):
            work[INFO + k, j] = 0.0
    for e in range(n_echoes):
        if work[USED, e] > 0.0:
            a = work[AMPLITUDES, e]
            z = work[M, e] * a
            ratio = look_up_one(noise, RATIO, z / (z + noise.product_scale))
            pull = a * (work[M, e] * ratio - a)
            weight = a * a * look_up_one(noise, INFORMATION, a / (a + noise.amplitude_scale))
            fill_slopes(model, work, p, e, SLOPES)
            for k in range(n_p):
                work[SCORE, k] += pull * work[SLOPES, k]
                for j in range(n_p):
                    work[INFO + k, j] += weight * work[SLOPES, k] * work[SLOPES, j]


@inner
def misfit(noise: KernelTables, n_echoes: int, work: Array) -> float:
    """Squared distance from the expected magnitude over its variance, summed over echoes."""
    total = 0.0
    for e in range(n_echoes):
        if work[USED, e] > 0.0:
            a = work[AMPLITUDES, e]
            d = look_up_one(noise, EXCESS, a / (a + noise.amplitude_scale))
            total += (work[M, e] - a - d) ** 2 / (2.0 * noise.n - d * d - 2.0 * a * d)
    return total
