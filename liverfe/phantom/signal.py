"""The noise-free signal and the receiver's noise, written for the phantom alone.

The estimator has equations of its own and neither borrows from the other, so that a wrong one
cannot confirm itself. What else a scan does to the signal stands in `effects`.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

__all__ = ["amplitude", "gamma_r2star_per_s", "received", "stored_counts"]

Map = NDArray[np.float32]

_MS_PER_S = np.float32(1000.0)


def amplitude(s0: Map, r2star_per_s: Map, echo_time_ms: float) -> Map:
    """Compute the noise-free magnitude at one echo: A(TE) = S0 exp(-R2* TE).

    Parameters
    ----------
    s0 : ndarray of float32
        Signal at echo time zero; 0 in air.
    r2star_per_s : ndarray of float32, same shape
        True R2*, in 1/s; NaN in air.
    echo_time_ms : float
        Echo time, in ms.

    Returns
    -------
    ndarray of float32
        Same shape; 0 in air.
    """
    rate_per_s = np.nan_to_num(r2star_per_s, nan=0.0)
    return np.asarray(s0 * np.exp(rate_per_s * (np.float32(-echo_time_ms) / _MS_PER_S)))


def received(
    clean: Map, *, sigma: float, n_channels: int, rng: np.random.Generator
) -> tuple[Map, NDArray[np.complex64]]:
    """Receive one noisy image with equal, uncorrelated channels.

    Channel c sees A/sqrt(n) + sigma (g1 + i g2), with independent standard Gaussian g1 and g2;
    the magnitude is the root of the sum of squares. So M/sigma is Rician for one channel, and
    M^2/sigma^2 noncentral chi-squared with 2 n degrees of freedom and noncentrality A^2/sigma^2
    for n (Constantinides 1997; abstract).

    Parameters
    ----------
    clean : ndarray of float32
        Noise-free magnitude A.
    sigma : float
        Standard deviation of the noise on each part of each channel.
    n_channels : int
        How many channels.
    rng : numpy.random.Generator
        Source of chance.

    Returns
    -------
    magnitude : ndarray of float32, same shape
        Root sum of squares.
    summed : ndarray of complex64, same shape
        Sum of the channels in the frame that turns with the clean signal: its angle is the
        error of the phase.
    """
    share = clean / np.float32(math.sqrt(n_channels))
    power = np.zeros_like(clean)
    summed = np.zeros(clean.shape, dtype=np.complex64)
    for _ in range(n_channels):
        real = share + np.float32(sigma) * rng.standard_normal(clean.shape, dtype=np.float32)
        imaginary = np.float32(sigma) * rng.standard_normal(clean.shape, dtype=np.float32)
        power += real * real + imaginary * imaginary
        summed.real += real
        summed.imag += imaginary
    return np.sqrt(power), summed


def gamma_r2star_per_s(
    mean_per_s: float, cv: float, n_voxels: int, rng: np.random.Generator
) -> Map:
    """Draw R2* of voxels with gamma-distributed iron.

    Parameters
    ----------
    mean_per_s : float
        Mean R2*, in 1/s.
    cv : float
        Standard deviation over mean; shape 1/cv^2 and scale mean cv^2. 0 gives the mean itself.
    n_voxels : int
        How many.
    rng : numpy.random.Generator
        Source of chance.

    Returns
    -------
    ndarray of float32, shape (n_voxels,)
        R2* in 1/s.
    """
    if cv == 0.0:
        return np.full(n_voxels, mean_per_s, dtype=np.float32)
    drawn = rng.gamma(1.0 / cv**2, mean_per_s * cv**2, size=n_voxels)
    return drawn.astype(np.float32)


def stored_counts(value: Map, slope: float) -> NDArray[np.uint16]:
    """Round signal to stored whole numbers: count = round(value / slope).

    Parameters
    ----------
    value : ndarray of float32
        Signal, not negative; it must fit (the maker of the phantom checks).
    slope : float
        Signal units of one count.

    Returns
    -------
    ndarray of uint16, same shape
        Stored counts.
    """
    return np.asarray(np.rint(value / np.float32(slope)), dtype=np.uint16)
