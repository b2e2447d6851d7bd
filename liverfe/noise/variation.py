"""How sigma varies over the image: a smooth surface through the residuals of pairs of voxels.

Parallel imaging makes the noise of the middle of the body larger than that of its rim, and that of
the body larger than that of the air. The logarithm of a residual sum of squares is ``ln sigma²``
plus a variable whose mean and variance depend on the degrees of freedom alone, so a polynomial in
position through those logarithms, with outliers drawn in, is the shape of sigma. Its level comes
from elsewhere.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray
from scipy.special import digamma, polygamma

from liverfe.noise.residual import Residuals
from liverfe.noise.triplets import Triplets

_MOST_DEGREE = 4
"""Highest degree of the polynomial within a slice."""
_SLICE_DEGREE = 2
"""Highest degree from slice to slice."""
_WORTH = 1.35
"""Below this ratio between its upper and lower twentieth over the tissue the variation is left
alone: borders of a small fatty liver change residuals by as much. A ramp of three gives 1.5 and
more."""
_SHARED = 2.0
"""So many pairs share voxels, or noise where images are interpolated, that they count as one."""
_DRAWN_IN = 1.5
_LEFT_OUT = 4.0
"""Logarithms further than this many SDs from the surface are drawn in, and in the end left out."""
_ROUNDS = 4
_MOST_PAIRS = 6000
_ENOUGH_PAIRS = 1000

Array = NDArray[np.float64]
Place = NDArray[np.int64] | np.int64


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Variation:
    """Sigma of each voxel over the scalar sigma.

    Attributes
    ----------
    relative_sigma : ndarray of float32, shape (X, Y, Z)
        The surface, 1 at the median of the tissue; outside the tissue as at its border.
    span : float
        Ratio between its upper and lower twentieth over the tissue.
    relative_sd : float
        Standard error of the surface in the middle of the tissue, as a share.
    """

    relative_sigma: NDArray[np.float32]
    span: float
    relative_sd: float


def sigma_variation(
    triplets: Triplets, found: Residuals, shape: tuple[int, int, int]
) -> Variation | None:
    """Find how sigma varies over the image.

    The degree of the polynomial is the one of lowest AIC; where that is 0, or the surface nearly
    flat, there is no variation worth a map.

    Parameters
    ----------
    triplets : Triplets
        Bright voxels.
    found : Residuals
        Of these triplets.
    shape : tuple of int
        Of the image.

    Returns
    -------
    Variation or None
        None where a scalar does.
    """
    if found.sigma is None or len(found.rss) < _ENOUGH_PAIRS:
        return None
    rows = slice(None, None, max(1, len(found.rss) // _MOST_PAIRS))
    rss, degrees = found.rss[rows], found.degrees[rows]
    half = 0.5 * np.arange(1, int(degrees.max()) + 1)
    excess = np.log(np.maximum(rss / found.sigma**2, 1e-30) / 2.0) - digamma(half)[degrees - 1]
    sd = np.sqrt(polygamma(1, half))[degrees - 1]
    place = triplets.where[found.rows[rows]]
    low, high = place.min(axis=0), place.max(axis=0)
    position = _scaled(place, low, high)
    n_slices = int(high[2] - low[2]) + 1
    best, terms, coefficients = np.inf, _terms(0, 1), np.zeros(1)
    for degree in range(_MOST_DEGREE + 1):
        trial = _terms(degree, n_slices)
        solution, deviance = _robust_fit(_basis(position, trial), excess, sd)
        score = deviance / _SHARED + 2.0 * len(trial)
        if degree > 1 and score > best:
            break
        if score < best:
            best, terms, coefficients = score, trial, solution
    here = 0.5 * _basis(position, terms) @ coefficients
    bottom, top = np.percentile(here, (5.0, 95.0))
    span = float(np.exp(top - bottom))
    if span < _WORTH:
        return None
    middle = float(np.median(here))
    surface = 0.5 * _surface(shape, low, high, terms, coefficients)
    relative = np.exp(np.clip(surface, here.min(), here.max()) - middle)
    return Variation(
        relative_sigma=relative.astype(np.float32),
        span=span,
        relative_sd=float(np.sqrt(_SHARED * len(coefficients) / (2.0 * found.degrees.sum()))),
    )


def _scaled(place: NDArray[np.int64], low: Place, high: Place) -> Array:
    """-1 ... 1 over the tissue, and held there outside of it."""
    span = np.maximum(high - low, 1)
    return np.asarray(np.clip(2.0 * (place - low) / span - 1.0, -1.0, 1.0))


def _terms(degree: int, n_slices: int) -> list[tuple[int, int, int]]:
    """Powers in x, y, z of all products of Legendre polynomials up to `degree` in all."""
    deepest = min(degree, _SLICE_DEGREE, n_slices - 1)
    return [
        (i, j, k)
        for k in range(deepest + 1)
        for i in range(degree + 1 - k)
        for j in range(degree + 1 - k - i)
    ]


def _basis(position: Array, terms: list[tuple[int, int, int]]) -> Array:
    x, y, z = (legendre.legvander(along, _MOST_DEGREE) for along in position.T)
    return np.stack([x[:, i] * y[:, j] * z[:, k] for i, j, k in terms], axis=1)


def _robust_fit(basis: Array, values: Array, sd: Array) -> tuple[Array, float]:
    """Coefficients by weighted least squares without what lies far out; and the deviance.

    Outliers are first drawn in (Huber), which finds the surface wherever it starts from, then left
    out (Tukey's biweight): pairs that cross a border of tissue are far off, and on one side.
    """
    scaled, target = basis / sd[:, None], values / sd
    z: Array = target - np.median(values) / sd
    coefficients: Array = np.zeros(basis.shape[1])
    for turn in range(2 * _ROUNDS):
        if turn < _ROUNDS:
            weight = np.minimum(1.0, _DRAWN_IN / np.maximum(np.abs(z), 1e-9))
        else:
            weight = np.maximum(1.0 - (z / _LEFT_OUT) ** 2, 0.0) ** 2
        weighted = scaled * weight[:, None]
        coefficients = np.asarray(
            np.linalg.solve(weighted.T @ scaled, weighted.T @ target), dtype=np.float64
        )
        z = target - scaled @ coefficients
    inside = np.minimum((z / _LEFT_OUT) ** 2, 1.0)
    return coefficients, float((1.0 - (1.0 - inside) ** 3).sum()) * _LEFT_OUT**2 / 3.0


def _surface(
    shape: tuple[int, int, int],
    low: NDArray[np.int64],
    high: NDArray[np.int64],
    terms: list[tuple[int, int, int]],
    coefficients: Array,
) -> Array:
    """The polynomial on the whole grid."""
    x, y, z = (
        _scaled(np.arange(size), first, last)
        for size, first, last in zip(shape, low, high, strict=True)
    )
    cube = np.zeros(tuple(np.max(terms, axis=0) + 1))
    for term, coefficient in zip(terms, coefficients, strict=True):
        cube[term] = coefficient
    return np.asarray(legendre.leggrid3d(x, y, z, cube))
