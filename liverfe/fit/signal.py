"""The signal equations: what a decay looks like once coils and magnitude have had their say.

Everything here is in units of sigma (the noise SD per real or imaginary channel): amplitude
``a = A / sigma``, magnitude ``m = M / sigma``; `n` is the effective number of coil channels of a
root-sum-of-squares magnitude (1: Rician).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

Array = NDArray[np.float64]

_SERIES_FROM = 30.0
"""From this amplitude on the asymptotic series replaces the closed form, whose terms cancel; its
four terms leave a relative error below 1e-9 there (tests)."""

_BESSEL_UP_TO = 1e8
"""Up to this argument the library's Bessel functions hold (they are NaN from 1e9 on); beyond it the
first terms of the asymptotic series are exact in double precision."""

_QUADRATURE_NODES = 96
"""Nodes for the information integral; doubling them changes nothing above 1e-10 (tests)."""


def amplitude(s0: ArrayLike, r2star_per_s: ArrayLike, echo_times_ms: ArrayLike) -> Array:
    """Mono-exponential decay of the true amplitude, ``A = S0 exp(-R2* TE)``.

    Parameters
    ----------
    s0, r2star_per_s, echo_times_ms : array_like
        Signal at echo time zero, R2* in 1/s, echo times in ms; broadcast together.

    Returns
    -------
    ndarray of float64
        Amplitude, in the unit of `s0`.
    """
    rate_time = np.asarray(r2star_per_s) * np.asarray(echo_times_ms) * 1e-3
    return np.asarray(s0 * np.exp(-rate_time), dtype=np.float64)


def noise_floor(n: int = 1) -> float:
    r"""Expected magnitude where there is no signal, in sigma.

    :math:`\beta_n = \sqrt{2}\,\Gamma(n+1/2)/\Gamma(n)`; 1.2533 for n = 1 (Constantinides 1997).

    Parameters
    ----------
    n : int
        Effective number of channels.

    Returns
    -------
    float
        The floor, in sigma.
    """
    return float(np.sqrt(2.0) * np.exp(special.gammaln(n + 0.5) - special.gammaln(n)))


def expected_excess(a: ArrayLike, n: int = 1) -> Array:
    r"""Expected magnitude minus amplitude, ``E[m] - a``, in sigma.

    :math:`E[m] = \beta_n\,{}_1F_1(-1/2; n; -a^2/2)` (Constantinides 1997). For n = 1 in closed
    form, :math:`\sqrt{\pi/2}\,[(1+2u)\,e^{-u}I_0(u) + 2u\,e^{-u}I_1(u)]`, u = a²/4
    (Gudbjartsson 1995); else by quadrature over the density, because library functions for 1F1
    overflow for many channels.

    Parameters
    ----------
    a : array_like
        Amplitude in sigma, at least 0.
    n : int
        Effective number of channels.

    Returns
    -------
    ndarray of float64
        The excess, falling from the noise floor at a = 0 towards (n - 1/2) / a.
    """
    a = np.asarray(a, dtype=np.float64)
    if n > 1:
        m, weight = _density(a, n)
        return np.asarray((weight * (m - a[..., None])).sum(axis=-1))
    small = np.minimum(a, _SERIES_FROM)
    u = small**2 / 4.0
    closed = np.sqrt(np.pi / 2.0) * ((1.0 + 2.0 * u) * special.i0e(u) + 2.0 * u * special.i1e(u))
    large = np.maximum(a, _SERIES_FROM)
    series = (1.0 + (1.0 + (3.0 + 37.5 / large**2) / (2.0 * large**2)) / (4.0 * large**2)) / (
        2.0 * large
    )
    return np.asarray(np.where(a < _SERIES_FROM, closed - small, series))


def expected_magnitude(a: ArrayLike, n: int = 1) -> Array:
    """Expected magnitude ``E[m]`` at amplitude `a`, in sigma.

    Parameters
    ----------
    a : array_like
        Amplitude in sigma, at least 0.
    n : int
        Effective number of channels.

    Returns
    -------
    ndarray of float64
        `expected_excess` plus the amplitude.
    """
    return np.asarray(a, dtype=np.float64) + expected_excess(a, n)


def magnitude_variance(a: ArrayLike, n: int = 1) -> Array:
    r"""Variance of the magnitude, in sigma²: :math:`\xi = 2n + a^2 - E[m]^2` (Koay 2006).

    Written through the excess d = E[m] - a as ``2n - d² - 2ad``, which does not cancel.

    Parameters
    ----------
    a : array_like
        Amplitude in sigma, at least 0.
    n : int
        Effective number of channels.

    Returns
    -------
    ndarray of float64
        Variance, from ``2n - beta_n²`` in noise alone up to 1.
    """
    a = np.asarray(a, dtype=np.float64)
    d = expected_excess(a, n)
    return np.asarray(2.0 * n - d**2 - 2.0 * a * d)


def expected_slope(a: ArrayLike, n: int = 1) -> Array:
    r"""Derivative of the expected magnitude by amplitude, ``dE[m]/da``.

    The covariance of magnitude and score, :math:`E[(m-a)(m\,I_n(ma)/I_{n-1}(ma) - a)]`, by
    quadrature; for n = 1 in closed form :math:`\sqrt{\pi/2}\,\frac{a}{2}\,[e^{-u}I_0(u) +
    e^{-u}I_1(u)]`, u = a²/4.
    """
    a = np.asarray(a, dtype=np.float64)
    if n > 1:
        m, weight = _density(a, n)
        score = m * bessel_ratio(m * a[..., None], n) - a[..., None]
        return np.asarray((weight * (m - a[..., None]) * score).sum(axis=-1))
    u = a**2 / 4.0
    return np.asarray(np.sqrt(np.pi / 2.0) * (a / 2.0) * (special.i0e(u) + special.i1e(u)))


def bessel_ratio(z: ArrayLike, n: int = 1) -> Array:
    """Ratio ``I_n(z) / I_{n-1}(z)``, the pull of the likelihood towards signal; 0 to 1."""
    z = np.asarray(z, dtype=np.float64)
    within = np.minimum(z, _BESSEL_UP_TO)
    below = special.ive(n - 1, within)
    tiny = below < 1e-280  # high orders underflow near zero, where the ratio is z / 2n
    ratio = np.where(tiny, z / (2.0 * n), special.ive(n, within) / np.where(tiny, 1.0, below))
    return np.where(z > _BESSEL_UP_TO, 1.0 - (n - 0.5) / np.maximum(z, 1.0), ratio)


def log_likelihood_kernel(z: ArrayLike, n: int = 1) -> Array:
    r"""``ln(z^{-(n-1)} I_{n-1}(z)) - z``: the part of the log-likelihood that is not quadratic.

    With z = m a the noncentral-chi log density is, up to terms in m alone,
    :math:`-(m-a)^2/2 + ` this. Its derivative is `bessel_ratio` - 1.
    """
    z = np.asarray(z, dtype=np.float64)
    order = n - 1
    within = np.minimum(z, _BESSEL_UP_TO)
    scaled = special.ive(order, within) * np.sqrt(within / np.where(z > 0, z, 1.0))
    usable = (scaled > 1e-280) & (z > 1e-8)
    at_zero = -order * np.log(2.0) - special.gammaln(n)
    series = at_zero + np.log1p(z**2 / (4.0 * n) * (1 + z**2 / (8.0 * (n + 1)))) - z
    safe = np.where(usable, z, 1.0)
    exact = np.log(np.where(usable, scaled, 1.0)) - order * np.log(safe)
    return np.asarray(np.where(usable, exact, series))


def information(a: ArrayLike, n: int = 1) -> Array:
    r"""Fisher information of one magnitude about its amplitude, in units of 1/sigma².

    :math:`J(a) = E[(m\,I_n(ma)/I_{n-1}(ma) - a)^2]`, by quadrature over the density; 1 for
    Gaussian noise, close to ``1 - (n - 1/2)/a²`` at large a.

    Parameters
    ----------
    a : array_like
        Amplitude in sigma, at least 0.
    n : int
        Effective number of channels.

    Returns
    -------
    ndarray of float64
        Information, 0 to 1.
    """
    a = np.asarray(a, dtype=np.float64)
    m, weight = _density(a, n)
    # E[score] = 0, so the mean square of the score is the information; this form does not cancel.
    score = m * bessel_ratio(m * a[..., None], n) - a[..., None]
    return np.asarray((weight * score**2).sum(axis=-1))


def _density(a: Array, n: int) -> tuple[Array, Array]:
    """Nodes in m and normalised weights of the density at amplitude `a`; shape (..., nodes).

    The density is smooth and within 10 sigma of its mean: Gauss-Legendre on that span.
    """
    nodes, node_weights = np.polynomial.legendre.leggauss(_QUADRATURE_NODES)
    centre = np.sqrt(a**2 + 2.0 * n - 1.0)[..., None]
    low = np.maximum(centre - 10.0, 0.0)
    half = (centre + 10.0 - low) / 2.0
    m = low + half * (nodes + 1.0)
    log_density = (
        (2 * n - 1) * np.log(m)
        - (m - a[..., None]) ** 2 / 2.0
        + log_likelihood_kernel(m * a[..., None], n)
    )
    weight = np.exp(log_density - log_density.max(axis=-1, keepdims=True)) * half * node_weights
    return m, weight / weight.sum(axis=-1, keepdims=True)
