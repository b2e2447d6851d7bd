"""What theory says, written with SciPy and NumPy alone: the package's own code is tested by it.

Units of sigma throughout: amplitude ``a = A / sigma``, magnitude ``m = M / sigma``. The density of
a root-sum-of-squares magnitude of n channels (Rician for n = 1) is that of methods sheet 1.2.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import optimize, special

from tests.statistics.truth import decay

Array = NDArray[np.float64]

_NODES = 300
_UNDERFLOW = 1e-250


@lru_cache(maxsize=1)
def _legendre() -> tuple[Array, Array]:
    return np.polynomial.legendre.leggauss(_NODES)


def log_density(m: ArrayLike, a: ArrayLike, n: int = 1) -> Array:
    """``ln p(m | a)``, complete: a(m/a)^n exp(-(m² + a²)/2) I_{n-1}(ma)."""
    m, a = np.asarray(m, dtype=float), np.asarray(a, dtype=float)
    z = m * a
    scaled = _bessel(n - 1, z)
    # High orders underflow near zero, where the first terms of the series are exact.
    series = np.log1p(z**2 / (4.0 * n)) - (n - 1) * np.log(2.0) - special.gammaln(n) - z
    tiny = scaled < _UNDERFLOW
    exact = np.log(np.where(tiny, 1.0, scaled)) - (n - 1) * np.log(z)
    bessel = np.where(tiny, series, exact)
    return np.asarray((2 * n - 1) * np.log(m) - 0.5 * (m - a) ** 2 + bessel)


def log_likelihood(m: Array, s0: ArrayLike, rate: ArrayLike, times_ms: Array, n: int = 1) -> Array:
    """Log-likelihood of rows of magnitudes, shape (V, E) -> (V,)."""
    a = np.maximum(decay(s0, rate, times_ms), 1e-12)
    return np.asarray(log_density(m, a, n).sum(axis=-1))


def score_in_log_amplitude(m: ArrayLike, a: ArrayLike, n: int = 1) -> Array:
    """``d ln p / d ln a = a (m I_n(ma) / I_{n-1}(ma) - a)`` (methods sheet 2.1)."""
    m, a = np.asarray(m, dtype=float), np.asarray(a, dtype=float)
    z = m * a
    below = _bessel(n - 1, z)
    tiny = below < _UNDERFLOW
    ratio = np.where(tiny, z / (2.0 * n), _bessel(n, z) / np.where(tiny, 1.0, below))
    return np.asarray(a * (m * ratio - a))


def _bessel(order: int, z: Array) -> Array:
    """``exp(-z) I_order(z)``; SciPy is five times as fast for the first two orders by name."""
    named = {0: special.i0e, 1: special.i1e}
    return np.asarray(named[order](z) if order in named else special.ive(order, z))


def information(a: ArrayLike, n: int = 1) -> Array:
    """Fisher information J of one magnitude about its amplitude (methods sheet 4.1)."""
    a = np.asarray(a, dtype=float)
    nodes, weights = _legendre()
    centre = np.sqrt(a**2 + 2 * n - 1)[..., None]
    low = np.maximum(centre - 11.0, 0.0)
    half = (centre + 11.0 - low) / 2.0
    m = low + half * (nodes + 1.0)
    density = np.exp(log_density(m, a[..., None], n)) * half * weights
    score = score_in_log_amplitude(m, a[..., None], n) / a[..., None]
    return np.asarray((density * score**2).sum(axis=-1))


def bound_per_s(times_ms: Array, rate: float, snr: float, n: int = 1) -> float:
    """Cramér-Rao bound of the SD of R2*, S0 unknown and sigma known (methods sheet 4.2)."""
    t = times_ms * 1e-3
    a = np.maximum(decay(snr, rate, times_ms), 1e-6)
    weight = a**2 * information(a, n)
    f00, f01, f11 = weight.sum(), -(t * weight).sum(), (t**2 * weight).sum()
    return float(np.sqrt(f00 / (f00 * f11 - f01**2)))


@lru_cache(maxsize=64)
def _limits(times_ms: tuple[float, ...], snr: float, n: int, share: float) -> tuple[float, float]:
    times = np.array(times_ms)

    def excess(log_rate: float) -> float:
        rate = float(np.exp(log_rate))
        return float(np.log(bound_per_s(times, rate, snr, n) / rate / share))

    best = optimize.minimize_scalar(excess, bounds=(1.0, 8.0), method="bounded")
    if not best.fun < 0:
        return float("nan"), float("nan")
    low = optimize.brentq(excess, 0.0, best.x) if excess(0.0) > 0 else 0.0
    return float(np.exp(low)), float(np.exp(optimize.brentq(excess, best.x, 9.0)))


def measurable_per_s(
    times_ms: Array, snr: float, *, n: int = 1, share: float = 0.10
) -> tuple[float, float]:
    """Between which R2* the bound is within `share` of R2* (methods sheet 4.3); NaN if nowhere."""
    return _limits(tuple(times_ms), snr, n, share)


def least_rmse_per_s(
    times_ms: Array,
    rate: float,
    snr: float,
    rng: np.random.Generator,
    *,
    n: int = 1,
    trials: int = 40_000,
) -> float:
    r"""Least RMSE of R2* that any estimator with the truth as its median can have.

    Let the estimator r have median R at every R and S0. Then for each R1 > R, ``r >= R1`` is a test
    of R against R1 with power 1/2, whatever S0 is under R1; by the lemma of Neyman and Pearson its
    size, ``P(r >= R1 | R)``, is at least that of the likelihood-ratio test of that power. The same
    holds below R. The mean square error is :math:`\int 2 |x - R|\, P(r \text{ beyond } x)\, dx`,
    so the sizes bound it from below. For each R1 the S0 that gives the largest size may be taken.

    Parameters
    ----------
    times_ms : ndarray of float64, shape (E,)
        Echo times.
    rate, snr : float
        True R2* in 1/s, and S0 over sigma.
    rng : Generator
        For the sizes, which are means over samples of the alternative.
    n : int
        Channels.
    trials : int
        Samples for each size.

    Returns
    -------
    float
        In 1/s.
    """
    sd = bound_per_s(times_ms, rate, snr, n)
    steps = np.concatenate([np.arange(0.1, 3.0, 0.2), np.arange(3.25, 9.0, 0.5)])
    noise = rng.standard_normal((trials, len(times_ms)))
    rest = rng.chisquare(2 * n - 1, (trials, len(times_ms)))
    square = 0.0
    for side in (-1.0, 1.0):
        there = [rate + side * step * sd for step in steps]
        sizes = [
            _least_size(times_ms, (snr, rate), other, noise, rest, n) if other > 0 else 0.0
            for other in there
        ]
        # 2 |x - R| P(x) over steps of 0.2 and 0.5: midpoints, exact enough where P is smooth.
        widths = np.where(steps < 3.0, 0.2, 0.5)
        square += float((2.0 * steps * np.array(sizes) * widths).sum())
    return sd * float(np.sqrt(square))


def _least_size(
    times_ms: Array, here: tuple[float, float], other: float, noise: Array, rest: Array, n: int
) -> float:
    """Size of the best test of (S0, R) against (any S0, `other`) that has power 1/2."""
    a = decay(*here, times_ms)
    shape = np.exp(-1e-3 * other * times_ms)
    alike = float((a * shape).sum() / (shape**2).sum())
    # Any S0 gives a bound; this one, at which the two are least told apart, gives nearly the best.
    b = alike * shape
    m = np.sqrt((b + noise) ** 2 + rest)
    ratio = (log_density(m, b, n) - log_density(m, np.maximum(a, 1e-9), n)).sum(axis=1)
    # P(ratio > median | here) as a mean over samples of the alternative.
    return float((np.exp(-ratio) * (ratio > np.median(ratio))).mean())
