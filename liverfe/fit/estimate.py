"""`fit_r2star`: a decay for every voxel of a stack, by the estimator of choice."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.fit.bounds import r2star_bound_per_s
from liverfe.fit.decay import DecayFit, FitOutcome
from liverfe.fit.least_squares import fit_least_squares, fit_moment, fit_truncated
from liverfe.fit.log_linear import fit_log_linear
from liverfe.fit.rician import fit_rician_ml
from liverfe.fit.rows import DecayRows
from liverfe.fit.tables import look_up, signal_tables
from liverfe.noise import NoiseLevel

ESTIMATORS = (
    "rician-ml",
    "first-moment",
    "second-moment",
    "least-squares",
    "log-linear",
    "weighted-log-linear",
    "truncation",
    "offset",
)
"""Estimators by their trade names; the first is the house's, the others are for comparison."""


def fit_r2star(stack: EchoStack, noise: NoiseLevel, *, estimator: str = "rician-ml") -> DecayFit:
    """Fit a mono-exponential decay to every voxel.

    Parameters
    ----------
    stack : EchoStack
        At least two echoes.
    noise : NoiseLevel
        Sigma and number of channels; nothing is assumed beside it.
    estimator : str
        One of `ESTIMATORS`.

    Returns
    -------
    DecayFit
        On the grid of the stack; slices with a missing image are not fitted.

    Raises
    ------
    ValueError
        If there are fewer than two echoes or the estimator is unknown.
    """
    if stack.n_echoes < 2:
        raise ValueError("a decay needs at least two echoes")
    if estimator not in ESTIMATORS:
        raise ValueError(f"unknown estimator {estimator!r}; one of {', '.join(ESTIMATORS)}")
    signal = stack.magnitude.reshape(-1, stack.n_echoes)
    sigma = (
        np.array([noise.sigma])
        if noise.sigma_map is None
        else noise.sigma_map.reshape(-1).astype(np.float64)
    )
    rows = fit_rows(signal, stack.echo_times_ms, sigma, noise.n_channels, estimator=estimator)
    shape = stack.grid.shape
    return DecayFit(
        estimator=estimator,
        r2star_per_s=rows.r2star_per_s.reshape(shape),
        s0=rows.s0.reshape(shape),
        r2star_se_per_s=rows.r2star_se_per_s.reshape(shape),
        reduced_chi2=rows.reduced_chi2.reshape(shape),
        outcome=rows.outcome.reshape(shape),
    )


def fit_rows(
    signal: NDArray[np.float32],
    echo_times_ms: NDArray[np.float64],
    sigma: NDArray[np.float64],
    n: int,
    *,
    estimator: str = "rician-ml",
) -> DecayRows:
    """Fit a list of voxels.

    For the estimators that give no standard error of their own, the Cramér-Rao bound at their fit
    stands in: their true scatter is not smaller.

    Parameters
    ----------
    signal : ndarray of float32, shape (V, E)
        Magnitudes, signal units.
    echo_times_ms : ndarray of float64, shape (E,)
        Echo times in ms.
    sigma : ndarray of float64, shape (1,) or (V,)
        Noise SD per channel, signal units.
    n : int
        Effective number of channels.
    estimator : str
        One of `ESTIMATORS`.

    Returns
    -------
    DecayRows
        One row a voxel.
    """
    if estimator == "rician-ml":
        return fit_rician_ml(signal, echo_times_ms, sigma, n)
    typical = float(np.median(sigma))
    fits: dict[str, Callable[[], DecayRows]] = {
        "first-moment": lambda: fit_moment(signal, echo_times_ms, typical, n, order=1),
        "second-moment": lambda: fit_moment(signal, echo_times_ms, typical, n, order=2),
        "least-squares": lambda: fit_least_squares(signal, echo_times_ms),
        "log-linear": lambda: fit_log_linear(signal, echo_times_ms, weighted=False),
        "weighted-log-linear": lambda: fit_log_linear(signal, echo_times_ms, weighted=True),
        "truncation": lambda: fit_truncated(signal, echo_times_ms, typical),
        "offset": lambda: fit_least_squares(signal, echo_times_ms, with_offset=True),
    }
    rows = fits[estimator]()
    _judge_like_the_house(rows, signal, echo_times_ms, sigma, n)
    return rows


def _judge_like_the_house(
    rows: DecayRows,
    signal: NDArray[np.float32],
    echo_times_ms: NDArray[np.float64],
    sigma: NDArray[np.float64],
    n: int,
) -> None:
    """Fill in bound and misfit, and mark decays that are none."""
    fitted = np.isfinite(rows.r2star_per_s) & (rows.s0 > 0)
    sigmas = sigma if len(sigma) == 1 else sigma[fitted]
    rate, s0 = rows.r2star_per_s[fitted].astype(np.float64), rows.s0[fitted].astype(np.float64)
    positive = np.maximum(rate, 0.0)
    with np.errstate(over="ignore"):  # a bound beyond float32 is as good as infinite
        rows.r2star_se_per_s[fitted] = r2star_bound_per_s(echo_times_ms, positive, s0, sigmas, n=n)
    if len(echo_times_ms) > 2:
        tables = signal_tables(n)
        a = (s0 / sigmas)[:, None] * np.exp(-positive[:, None] * echo_times_ms * 1e-3)
        d = look_up(tables.excess, a / (a + tables.amplitude_scale))
        misfit = (signal[fitted] / sigmas[:, None] - a - d) ** 2 / (2.0 * n - d**2 - 2.0 * a * d)
        rows.reduced_chi2[fitted] = misfit.sum(axis=1) / (len(echo_times_ms) - 2)
    rows.outcome[fitted & (rows.r2star_per_s <= 0)] = FitOutcome.AT_LOWER_BOUND
