"""Decays with noise, made without the package: what the tests of the fit are held against."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from liverfe.fit import DecayRows, fit_rows

Array = NDArray[np.float64]

TWELVE_MS = 1.0 + 0.8 * np.arange(12)
"""Echo times of the methods sheet's tables (2.3, 2.4, 4.2)."""
PROTOCOLS_MS = {
    "1.0+0.8k": TWELVE_MS,
    "0.99+1.13k": 0.99 + 1.13 * np.arange(12),
    "1.2k": 1.2 * np.arange(1, 9),
    "1.3+2.2k": 1.3 + 2.2 * np.arange(8),
    "0.8+0.7k": 0.8 + 0.7 * np.arange(12),
}
"""The protocols of its tables 4.2 and 4.3."""
SIGMA_ONE = np.ones(1)


def decay(s0: ArrayLike, rate_per_s: ArrayLike, times_ms: Array) -> Array:
    """S0 exp(-R t), shape (V, E)."""
    s0, rate = np.atleast_1d(s0).astype(float), np.atleast_1d(rate_per_s).astype(float)
    return s0[:, None] * np.exp(-1e-3 * rate[:, None] * times_ms)


def magnitudes(amplitude: Array, rng: np.random.Generator, n: int = 1) -> NDArray[np.float32]:
    """Root of the sum of squares of n complex channels with unit noise, one of them with signal."""
    power = (amplitude + rng.standard_normal(amplitude.shape)) ** 2
    power += rng.chisquare(2 * n - 1, amplitude.shape)
    return np.sqrt(power).astype(np.float32)


def expected_mean(a: Array, n: int) -> Array:
    """E[m] (Gudbjartsson 1995, Constantinides 1997) in closed form, without the package."""
    if n == 1:
        u = a**2 / 4
        return np.sqrt(np.pi / 2) * ((1 + 2 * u) * special.i0e(u) + 2 * u * special.i1e(u))
    beta = np.sqrt(2) * special.gamma(n + 0.5) / special.gamma(n)
    small = np.minimum(a, 20.0)
    closed = beta * special.hyp1f1(-0.5, n, -(small**2) / 2)
    # 1F1 ends in overflow; its asymptotic series (A&S 13.5.1) has converged long before.
    k = np.arange(8)
    terms = special.poch(-0.5, k) * special.poch(0.5 - n, k) / special.factorial(k)
    large = np.maximum(a, 20.0)
    series = large * (terms * (2 / large[..., None] ** 2) ** k).sum(axis=-1)
    return np.where(a < 20.0, closed, series)


def fit(
    signal: ArrayLike,
    times_ms: ArrayLike,
    *,
    sigma: ArrayLike = SIGMA_ONE,
    n: int = 1,
    model: str = "rician-ml",
    usable: NDArray[np.bool_] | None = None,
) -> DecayRows:
    """`fit_rows` of one voxel or many."""
    rows = np.atleast_2d(np.asarray(signal)).astype(np.float32)
    return fit_rows(
        rows, np.asarray(times_ms, float), np.atleast_1d(np.asarray(sigma, float)), n,
        model=model, usable=usable,
    )  # fmt: skip
