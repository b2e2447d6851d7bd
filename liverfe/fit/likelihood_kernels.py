"""The likelihood of one voxel and its derivatives, for compiled code: any signal model.

No SciPy inside; the noise equations come in as tables (`liverfe.fit.tables`), the signal model as
an argument (`liverfe.fit.signal_models`). Echo times are in ms and R2* in 1/ms; amplitudes in units
of sigma.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numba import njit
from numpy.typing import NDArray

from liverfe.fit.signal_models import SignalModel, fill_slopes, log_amplitude
from liverfe.fit.tables import KernelTables

Array = NDArray[np.float64]
Used = NDArray[np.bool_]

_DARKEST = 0.01
"""Magnitudes below this many sigma count as it in the log-likelihood: a stored zero has none."""

_INSIDE: dict[str, Any] = {"no_cpython_wrapper": True, "no_cfunc_wrapper": True}
inner = njit(error_model="numpy", **_INSIDE)
"""For functions that only compiled code calls: without doors for others they compile in half the
time, and what calls them keeps them in its own cache."""


class Workspace(NamedTuple):
    """Room for one voxel, made once a block: compiled code that makes arrays compiles slowly.

    Attributes
    ----------
    amplitudes, trial : ndarray of float64, shape (E,)
        Amplitudes at the point reached, and at the one that is tried.
    p, p_trial, p_best, p_simple, slopes, score, step : ndarray of float64, shape (P,)
        Parameters, derivatives of ln A, score, step.
    info, factor : ndarray of float64, shape (P, P)
        Information and its Cholesky factor.
    held : ndarray of bool, shape (P,)
        Parameters that are held at a bound.
    """

    amplitudes: Array
    trial: Array
    p: Array
    p_trial: Array
    p_best: Array
    p_simple: Array
    slopes: Array
    score: Array
    step: Array
    info: Array
    factor: Array
    held: Used

    @classmethod
    def of(cls, n_echoes: int, n_parameters: int) -> Workspace:
        """Room for so many echoes and parameters."""
        square = (n_parameters, n_parameters)
        return cls(
            amplitudes=np.empty(n_echoes),
            trial=np.empty(n_echoes),
            p=np.empty(n_parameters),
            p_trial=np.empty(n_parameters),
            p_best=np.empty(n_parameters),
            p_simple=np.empty(n_parameters),
            slopes=np.empty(n_parameters),
            score=np.empty(n_parameters),
            step=np.empty(n_parameters),
            info=np.zeros(square),
            factor=np.zeros(square),
            held=np.zeros(n_parameters, dtype=bool),
        )


@inner
def look_up_one(table: Array, u: float) -> float:
    """One value from cubic pieces."""
    x = u * len(table)
    i = min(int(x), len(table) - 1)
    t = x - i
    value: float = table[i, 0] + t * (table[i, 1] + t * (table[i, 2] + t * table[i, 3]))
    return value


@inner
def copy(source: Array, target: Array) -> None:
    """Copy the first ``len(source)`` numbers."""
    for k in range(len(source)):
        target[k] = source[k]


@inner
def log_likelihood(
    model: SignalModel, m: Array, used: Used, p: Array, noise: KernelTables, amplitudes: Array
) -> float:
    """Log-likelihood up to terms in the data alone; leaves the amplitudes behind."""
    total = 0.0
    for e in range(len(m)):
        a = np.exp(log_amplitude(model, p, e))
        amplitudes[e] = a
        if used[e]:
            z = m[e] * a
            shape = look_up_one(noise.kernel, z / (z + noise.product_scale))
            total += shape - (noise.n - 0.5) * np.log(z + noise.product_scale)
            total -= 0.5 * (a - m[e]) ** 2
    return total


@inner
def data_terms(m: Array, used: Used, sigma: float, n: int) -> float:
    """Terms of the log-likelihood in the data alone, density per signal unit."""
    total = 0.0
    for e in range(len(m)):
        if used[e]:
            total += (2.0 * n - 1.0) * np.log(max(m[e], _DARKEST)) - np.log(sigma)
    return total


@inner
def score_and_information(
    model: SignalModel, m: Array, used: Used, p: Array, noise: KernelTables, work: Workspace
) -> None:
    """Score and Fisher information of the parameters, at the amplitudes in `work`."""
    n_p = len(p)
    for k in range(n_p):
        work.score[k] = 0.0
        for j in range(n_p):
            work.info[k, j] = 0.0
    for e in range(len(m)):
        if not used[e]:
            continue
        a = work.amplitudes[e]
        z = m[e] * a
        pull = a * (m[e] * look_up_one(noise.ratio, z / (z + noise.product_scale)) - a)
        weight = a * a * look_up_one(noise.information, a / (a + noise.amplitude_scale))
        fill_slopes(model, p, e, work.slopes)
        for k in range(n_p):
            work.score[k] += pull * work.slopes[k]
            for j in range(n_p):
                work.info[k, j] += weight * work.slopes[k] * work.slopes[j]


@inner
def misfit(m: Array, used: Used, amplitudes: Array, noise: KernelTables) -> float:
    """Squared distance from the expected magnitude over its variance, summed over echoes."""
    total = 0.0
    for e in range(len(m)):
        if used[e]:
            a = amplitudes[e]
            d = look_up_one(noise.excess, a / (a + noise.amplitude_scale))
            total += (m[e] - a - d) ** 2 / (2.0 * noise.n - d * d - 2.0 * a * d)
    return total
