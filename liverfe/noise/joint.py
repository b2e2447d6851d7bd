"""Sigma and channels together by maximum likelihood, each voxel's own decay profiled out.

The likelihood of a noise level is the sum over voxels of the greatest log-likelihood that any decay
gives there. With two parameters a voxel taken from E echoes its maximum lies sqrt((E - 2) / E) too
low (Neyman & Scott 1948); the adjustment of Cox & Reid (1987), half the log determinant of the
information about the parameters, takes that off.

Unlike residuals this uses every echo down to the noise floor, and so tells the number of channels;
unlike them it takes decays for single exponentials. Curved decays look like the floor of more
channels, never of fewer: what it says is an upper bound of n, unless `dark_tissue` agrees.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from liverfe.noise.triplets import Triplets

_VOXELS_IN_PARCEL = 40
_MOST_PARCELS = 50
_FEWEST_PARCELS = 5
_DARK_TENTH = 0.1
"""Half of the parcels lie in the tenth of the tissue that decays fastest: it shows the floor."""
_STEP = 0.05
"""Sigmas tried lie this far apart on the logarithm."""
_ROUNDS = 4
_FURTHEST = 10.0
"""A parabola is not followed further than this many steps at once."""
_FITTED = 0.5
"""At least this share of voxels must have a fit."""
_MEDIAN_COSTS = 1.2533
"""Standard error of a median over that of a mean, sqrt(pi / 2)."""
_LEAST_RELATIVE_SD = 0.01
Array = NDArray[np.float64]


class DecayLikelihood(Protocol):
    """How well the best decay fits each voxel under a noise level."""

    def __call__(
        self, signal: NDArray[np.float32], echo_times_ms: Array, sigma: Array, n: int
    ) -> tuple[Array, Array]:
        """Greatest log-likelihood, and log determinant of the information, of each voxel.

        Parameters
        ----------
        signal : ndarray of float32, shape (V, E)
            Magnitudes.
        echo_times_ms : ndarray of float64, shape (E,)
            Echo times.
        sigma : ndarray of float64, shape (1,) or (V,)
            Noise SD per channel.
        n : int
            Number of channels.

        Returns
        -------
        tuple of ndarray of float64, shape (V,)
            With all terms that depend on sigma or n; NaN where there is no fit.
        """
        ...


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class JointFit:
    """The most likely sigma for one number of channels.

    Attributes
    ----------
    n_channels : int
        The number.
    sigma : float
        Median over the parcels of what each says.
    relative_sd : float
        Its standard error as a share.
    parcel_sigma : ndarray of float64, shape (P,)
        What each parcel says.
    log_likelihood : ndarray of float64, shape (P, V)
        Adjusted profile log-likelihood of each voxel at `sigma`; NaN where there is no fit.
    """

    n_channels: int
    sigma: float
    relative_sd: float
    parcel_sigma: Array
    log_likelihood: Array


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Parcels:
    """Signals of voxels in parcels of neighbours; shape (P, voxels in a parcel, E)."""

    signal: NDArray[np.float32]
    times_ms: Array


def parcels_of(triplets: Triplets) -> Parcels | None:
    """Choose parcels of voxels, half of them in the tissue that decays fastest.

    Chosen by the voxel between two partners and taken from the partners, so that no voxel is chosen
    by its own noise.
    """
    n_wanted = _VOXELS_IN_PARCEL * (_MOST_PARCELS // 2)
    if len(triplets) < 2 * _VOXELS_IN_PARCEL * _FEWEST_PARCELS:
        return None
    middle = triplets.square[1]
    lasting = middle[:, -2:].mean(axis=1) / middle[:, 0]
    order = np.argsort(lasting, kind="stable")
    cut = int(_DARK_TENTH * len(order))
    parcels = []
    for rows in (order[:cut], order[cut:]):
        rows = np.sort(rows)[:: max(1, len(rows) // n_wanted)]  # neighbours stay together
        rows = rows[: len(rows) // _VOXELS_IN_PARCEL * _VOXELS_IN_PARCEL]
        parcels.append(np.sqrt(triplets.square[0, rows]).astype(np.float32))
    signal = np.concatenate(parcels)
    return Parcels(
        signal=signal.reshape(-1, _VOXELS_IN_PARCEL, signal.shape[1]), times_ms=triplets.times_ms
    )


def fit_jointly(
    parcels: Parcels, likelihood: DecayLikelihood, *, sigma: float, n_channels: int
) -> JointFit | None:
    """Find the most likely sigma for a number of channels.

    Parameters
    ----------
    parcels : Parcels
        Voxels of tissue.
    likelihood : DecayLikelihood
        How well decays fit.
    sigma : float
        Where to look first: what the residuals say.
    n_channels : int
        Effective number of channels.

    Returns
    -------
    JointFit or None
        None where too few voxels are fitted.
    """
    n_parcels, n_voxels, n_echoes = parcels.signal.shape
    flat = parcels.signal.reshape(-1, n_echoes)
    tried: dict[int, Array] = {}

    def adjusted(step: int) -> Array:
        if step not in tried:
            trial = np.array([sigma * np.exp(step * _STEP)])
            log_l, log_det = likelihood(flat, parcels.times_ms, trial, n_channels)
            total = log_l - 0.5 * log_det
            tried[step] = np.where(np.isfinite(total), total, np.nan).reshape(n_parcels, n_voxels)
        return tried[step]

    centre = 0
    for _ in range(_ROUNDS):
        low, here, high = (adjusted(centre + k) for k in (-1, 0, 1))
        fitted = np.isfinite(low) & np.isfinite(here) & np.isfinite(high)
        if fitted.mean() < _FITTED:
            return None
        rise, bend = 0.5 * (high - low), 2.0 * here - low - high
        own = np.where(fitted, rise, 0.0).sum(axis=1) / np.maximum(
            np.where(fitted, bend, 0.0).sum(axis=1), 1e-9
        )
        own = np.clip(own, -_FURTHEST, _FURTHEST)
        best = float(np.median(own))
        if abs(best) <= 1.0:
            break
        centre += int(np.rint(best))
    spread = 1.4826 * _STEP * float(np.median(np.abs(own - best)))
    return JointFit(
        n_channels=n_channels,
        sigma=float(sigma * np.exp((centre + best) * _STEP)),
        relative_sd=max(_MEDIAN_COSTS * spread / float(np.sqrt(n_parcels)), _LEAST_RELATIVE_SD),
        parcel_sigma=np.asarray(sigma * np.exp((centre + own) * _STEP)),
        log_likelihood=here + best * rise - 0.5 * best**2 * bend,
    )
