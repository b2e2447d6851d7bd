"""Sigma from the residuals of a decay, in voxels and echoes with high signal.

There the noise of a magnitude is Gaussian with SD sigma, once the noise power of the channels is
taken off, so this works without background air and measures the noise where the tissue is.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtri

from liverfe.echoes import EchoStack
from liverfe.noise.level import NoiseCandidate
from liverfe.noise.triplets import Triplets, bright_triplets

_HIGH_SIGNAL = 8.0
"""Echoes of an amplitude above this many sigma count, by the voxel between the two ..."""
_STILL_SIGNAL = 4.0
"""... as long as neither of the two is below this, which noise alone never brings about."""
_FEWEST_ECHOES = 3
_ENOUGH_VOXELS = 200
_LEAST_RELATIVE_SD = 0.02
"""Sigma from residuals is never believed better than this: the model is not exact either."""
_MEDIAN_COSTS = 1.3
"""Standard error of sigma from the median of chi-squares over that from their mean, about."""
_INSIDE = 0.90
"""Share of true pairs that the last median is taken over: the others, and all outliers, go."""
_ROUNDS = 8

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Residuals:
    """Weighted residual sums of squares of pairs of voxels.

    Attributes
    ----------
    sigma : float or None
        What they say; None with the reason in `remark`.
    rss : ndarray of float64, shape (P,)
        Sum of each pair: sigma² times chi-square.
    degrees : ndarray of int64, shape (P,)
        Of that chi-square.
    rows : ndarray of int64, shape (P,)
        Which triplets the pairs are.
    remark : str
        Why there is no sigma, else empty.
    """

    sigma: float | None
    rss: Array
    degrees: NDArray[np.int64]
    rows: NDArray[np.int64]
    remark: str = ""

    @property
    def scatter(self) -> float:
        """What chance alone makes of sigma, as a share of it."""
        return _MEDIAN_COSTS / float(np.sqrt(2.0 * self.degrees.sum()))

    @property
    def relative_sd(self) -> float:
        """Standard error of sigma as a share of it."""
        return max(self.scatter, _LEAST_RELATIVE_SD)


def sigma_from_residuals(
    stack: EchoStack, *, start_sigma: float | None = None, n_channels: int = 1
) -> NoiseCandidate:
    """Estimate sigma from how two voxels near each other decay.

    The logarithm of the ratio of their signals is a straight line in echo time; the weighted
    residual sum of squares is sigma² times chi-square with N - 2 degrees. A ratio, because what one
    exponential does not explain (fat, two kinds of tissue) is much the same in both and cancels,
    where it would pass for noise and hide the misfit. A third voxel says which echoes count: one
    that chose its own would keep those that noise happens to lift. The median over pairs keeps
    vessels and artefacts out.

    Parameters
    ----------
    stack : EchoStack
        Magnitudes in true values.
    start_sigma : float or None
        Where to start the iteration between sigma and the echoes that count.
    n_channels : int
        Effective number of channels, whose noise power ``(2n - 1) sigma²`` is taken off.

    Returns
    -------
    NoiseCandidate
        Sigma, or None with a remark that says why there is none.
    """
    triplets = bright_triplets(stack)
    return residual_candidate(
        residuals(triplets, start_sigma=start_sigma, n_channels=n_channels), n_channels
    )


def residual_candidate(found: Residuals, n_channels: int) -> NoiseCandidate:
    """Put what the residuals say into the form of every candidate."""
    known = found.sigma is not None
    return NoiseCandidate(
        method="residual",
        sigma=found.sigma,
        n_channels=n_channels if known else 1,
        relative_sd=found.relative_sd if known else None,
        n_voxels=len(found.rss),
        remark=found.remark or "residuals of echoes with high signal, median over pairs of voxels",
    )


def residuals(
    triplets: Triplets, *, start_sigma: float | None = None, n_channels: int = 1
) -> Residuals:
    """Find sigma and the residuals that say so.

    Parameters
    ----------
    triplets : Triplets
        Bright voxels.
    start_sigma, n_channels
        As in `sigma_from_residuals`.

    Returns
    -------
    Residuals
        With sigma None where there is none.
    """
    n_echoes = len(triplets.times_ms)
    if n_echoes < _FEWEST_ECHOES:
        return _closed("two echoes leave no residual")
    square = triplets.square
    if len(triplets) < _ENOUGH_VOXELS:
        return _closed("too few voxels with high signal")
    sigma = start_sigma or float(np.sqrt(np.median(square[..., 0]))) / 50.0
    degrees = np.maximum(np.arange(n_echoes + 1) - 2, 1)
    found = _closed("")
    for _ in range(_ROUNDS):
        noise_power = (2 * n_channels - 1) * sigma**2
        leading = _leading(square[1] > (_HIGH_SIGNAL * sigma) ** 2 + noise_power)
        outer = np.minimum(square[0], square[2])
        still = _leading(outer > (_STILL_SIGNAL * sigma) ** 2 + noise_power)
        rows = np.flatnonzero((leading >= _FEWEST_ECHOES) & (still >= leading))
        if len(rows) < _ENOUGH_VOXELS:
            return _closed("too few voxels with three echoes of high signal")
        kept = leading[rows]
        powers = square[:, rows] - noise_power
        rss = _weighted_rss(powers, triplets.times_ms, kept, n_channels * sigma**2)
        updated = float(np.sqrt(_middle(rss, degrees[kept])))
        if not updated > 0:
            return _closed("the residuals are exactly zero")
        settled = abs(updated - sigma) < 1e-3 * sigma
        sigma = updated
        found = Residuals(sigma=sigma, rss=rss, degrees=degrees[kept], rows=rows)
        if settled:
            break
    return found


def _middle(rss: Array, degrees: NDArray[np.int64]) -> float:
    """Sigma² by the median, once the pairs have gone that lie far out: they cross a border."""
    k = np.arange(int(degrees.max()) + 1)
    level = float(np.median(rss / chdtri(k, 0.5)[degrees]))
    outermost, median = chdtri(k, 1.0 - _INSIDE), chdtri(k, 1.0 - _INSIDE / 2.0)
    for _ in range(_ROUNDS):
        inside = rss < outermost[degrees] * level
        if not inside.any():
            break
        level = float(np.median(rss[inside] / median[degrees[inside]]))
    return level


def _leading(above: NDArray[np.bool_]) -> NDArray[np.int64]:
    """How many echoes from the first on are above, row by row."""
    return np.asarray(np.where(above.all(axis=1), above.shape[1], np.argmin(above, axis=1)))


def _weighted_rss(
    powers: Array, times_ms: Array, kept: NDArray[np.int64], noise_power: float
) -> Array:
    """Weighted residual sum of squares of ``ln(A1 / A2)`` over the first `kept` echoes of each row.

    Powers are A² with noise; with n channels ln A has the variance ``sigma² (A² + n sigma²) / A⁴``.
    The A of the weights is that of the voxel between, brought to level and slope of each partner:
    weights of their own would be low wherever noise has lowered the signal.
    """
    used = np.arange(powers.shape[2]) < kept[:, None]
    logs = np.log(np.where(used, powers, 1.0))
    steady = np.where(used, powers[1], 0.0)
    variance = np.zeros_like(steady)
    for partner in (0, 2):
        p = np.exp(logs[1] + _line(logs[partner] - logs[1], steady, times_ms))
        variance += (p + noise_power) / p**2
    w = np.where(used, 1.0 / variance, 0.0)
    y = 0.5 * (logs[0] - logs[2])
    return np.asarray((w * (y - _line(y, w, times_ms)) ** 2).sum(axis=1))


def _line(y: Array, weight: Array, times_ms: Array) -> Array:
    """Weighted straight line in echo time through each row."""
    total = weight.sum(axis=1, keepdims=True)
    dt = times_ms - (weight * times_ms).sum(axis=1, keepdims=True) / total
    mean = (weight * y).sum(axis=1, keepdims=True) / total
    slope = (weight * dt * y).sum(axis=1, keepdims=True) / (weight * dt**2).sum(
        axis=1, keepdims=True
    )
    return np.asarray(mean + slope * dt)


def _closed(remark: str) -> Residuals:
    none = np.zeros(0, dtype=np.int64)
    return Residuals(sigma=None, rss=np.zeros(0), degrees=none, rows=none, remark=remark)
