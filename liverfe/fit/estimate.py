"""`fit_r2star`: a decay for every voxel of a stack, by the estimator of choice."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.fit.comparators import COMPARATORS
from liverfe.fit.comparators.judgement import judge_like_the_house
from liverfe.fit.decay import DecayFit
from liverfe.fit.estimator import Estimator
from liverfe.fit.rician import fit_rician_ml
from liverfe.fit.rows import DecayRows
from liverfe.noise import NoiseLevel


def _fit_house(
    signal: NDArray[np.float32],
    echo_times_ms: NDArray[np.float64],
    sigma: NDArray[np.float64],
    n: int,
    usable: NDArray[np.bool_] | None,
) -> DecayRows:
    return fit_rician_ml(signal, echo_times_ms, sigma, n, usable=usable)


_HOUSE = Estimator(
    key="rician-ml",
    fit=_fit_house,
    noise_handling="corrected",
    is_for_reports=True,
    citations=("sijbers1998",),
)

_REGISTRY = {estimator.key: estimator for estimator in (_HOUSE, *COMPARATORS)}

ESTIMATORS = tuple(_REGISTRY)
"""Estimators by their trade names; the first is the house's, the others stand beside it."""


def estimator_named(key: str) -> Estimator:
    """Look an estimator up.

    Parameters
    ----------
    key : str
        One of `ESTIMATORS`.

    Returns
    -------
    Estimator
        Its entry of the registry.

    Raises
    ------
    ValueError
        If there is none of this name.
    """
    if key not in _REGISTRY:
        raise ValueError(f"unknown estimator {key!r}; one of {', '.join(ESTIMATORS)}")
    return _REGISTRY[key]


def fit_r2star(
    stack: EchoStack,
    noise: NoiseLevel,
    *,
    model: str = "rician-ml",
    usable: NDArray[np.bool_] | None = None,
) -> DecayFit:
    """Fit a mono-exponential decay to every voxel.

    Parameters
    ----------
    stack : EchoStack
        At least two echoes.
    noise : NoiseLevel
        Sigma and number of channels; nothing is assumed beside it.
    model : str
        One of `ESTIMATORS`.
    usable : ndarray of bool, shape (X, Y, Z, E), or None
        Echoes that count in each voxel; None: all.

    Returns
    -------
    DecayFit
        On the grid of the stack; a voxel is not fitted where an echo that counts is missing or
        fewer count than the estimator needs.

    Raises
    ------
    ValueError
        If there are fewer than two echoes, the estimator is unknown or `usable` has another shape.
    """
    if stack.n_echoes < 2:
        raise ValueError("a decay needs at least two echoes")
    if usable is not None and usable.shape != stack.magnitude.shape:
        raise ValueError(f"usable has shape {usable.shape}, not {stack.magnitude.shape}")
    sigma = (
        np.array([noise.sigma])
        if noise.sigma_map is None
        else noise.sigma_map.reshape(-1).astype(np.float64)
    )
    rows = fit_rows(
        stack.magnitude.reshape(-1, stack.n_echoes),
        stack.echo_times_ms,
        sigma,
        noise.n_channels,
        model=model,
        usable=None if usable is None else usable.reshape(-1, stack.n_echoes),
    )
    shape = stack.grid.shape
    return DecayFit(
        estimator=model,
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
    model: str = "rician-ml",
    usable: NDArray[np.bool_] | None = None,
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
        Effective number of channels, 1 to 64.
    model : str
        One of `ESTIMATORS`.
    usable : ndarray of bool, shape (V, E), or None
        Echoes that count in each voxel; None: all.

    Returns
    -------
    DecayRows
        One row a voxel.

    Raises
    ------
    ValueError
        If the estimator is unknown or `usable` has another shape than `signal`.
    """
    estimator = estimator_named(model)
    if usable is not None and usable.shape != signal.shape:
        raise ValueError(f"usable has shape {usable.shape}, not {signal.shape}")
    rows = estimator.fit(signal, echo_times_ms, sigma, n, usable)
    if estimator is not _HOUSE:
        judge_like_the_house(rows, signal, echo_times_ms, sigma, n, usable)
    return rows
