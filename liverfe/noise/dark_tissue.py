"""How many channels there are, from the dark end of the tissue and without a model of the decay.

The square of a magnitude has mean ``P = A² + 2n sigma²`` and variance ``4 sigma² P - 4n sigma⁴``
whatever A is. Both are read off pairs of voxels in those three echoes in a row that are darkest in
the voxel between; with sigma known from bright echoes they give

    n = P / sigma² - variance / (4 sigma⁴)

and, because A² is not negative, ``n <= P / (2 sigma²)``.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammainc, gammaincinv

from liverfe.noise.triplets import Triplets

_SHARES = (0.01, 0.02, 0.05, 0.1, 0.2, 0.4, 0.8)
"""Shares of the darkest echoes that are tried: the one that tells most is taken."""
_FEWEST = 300
_PARCELS = 40
"""So many parcels of neighbouring pairs say how much the result scatters ..."""
_TRIMMED = 4
"""... of which so many at either end are left out: vessels, motion."""
_ALIKE = 2.0
"""Partners above this many times the square of the voxel between belong to other tissue, ..."""
_FLOOR = 16.0
"""... which is told where the square is above this many sigma²."""
_SIGMA_SD = 0.01
"""Standard error of sigma as a share, as far as it moves the upper bound."""
_OF_SIGNAL = 0.03
"""Standard error of n as a share of A² / sigma²: sigma enters twice, tissue differs, and trimming
takes a little off a skew variance."""
_ONE_AT_LEAST = 0.8
"""A range that ends below this says that the pairs are no pairs."""
_SURE = 3.0
"""Standard errors either way within which n may lie."""

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class DarkTissue:
    """What dark echoes say of the number of channels.

    Attributes
    ----------
    channels : float
        Best estimate, not a whole number.
    fewest, most : float
        Between these it may lie.
    """

    channels: float
    fewest: float
    most: float


def channels_of_dark_tissue(triplets: Triplets, sigma: float) -> DarkTissue | None:
    """Estimate n from the spread of the darkest echoes about their level.

    Parameters
    ----------
    triplets : Triplets
        Bright voxels (at the first echo).
    sigma : float
        Noise SD per channel from their bright echoes.

    Returns
    -------
    DarkTissue or None
        None where there are too few voxels or echoes.
    """
    if len(triplets.times_ms) < 3 or len(triplets) < _FEWEST:
        return None
    darkness, power, variance = _threes(triplets.square / sigma**2, triplets.times_ms)
    if len(darkness) < _FEWEST:
        return None
    order = np.argsort(darkness, kind="stable")
    best: tuple[float, float, float] | None = None
    most = np.inf
    for share in _SHARES:
        chosen = np.sort(order[: max(int(share * len(order)), _FEWEST)])  # neighbours together
        level, level_se = _over_parcels(power[chosen])
        spread, _ = _over_parcels(variance[chosen])
        spread /= _trimmed_share(len(chosen) // _PARCELS)
        _, se = _over_parcels(power[chosen] - variance[chosen] / 4.0)
        found = level - spread / 4.0
        amplitude_square = max(level - 2.0 * found, 0.0)
        se = float(np.hypot(se, _OF_SIGNAL * amplitude_square))
        most = min(most, 0.5 * (level + _SURE * (level_se + 2.0 * _SIGMA_SD * level)))
        if best is None or se < best[1]:
            best = (found, se, level)
    assert best is not None
    found, se, level = best
    if found + _SURE * se < _ONE_AT_LEAST:
        # The squares scatter more than any noise does: they are not of one tissue.
        return DarkTissue(channels=1.0, fewest=1.0, most=most)
    return DarkTissue(channels=found, fewest=found - _SURE * se, most=min(found + _SURE * se, most))


def _threes(square: Array, times_ms: Array) -> tuple[Array, Array, Array]:
    """Darkness, level and variance of the squares, of each pair in each three echoes in a row.

    The variance is that of the part which is no straight line in echo time, of the difference
    between the partners: what decay and fat add to it cancels twice. In units of sigma.
    """
    n_echoes = len(times_ms)
    stops = [stop for stop in range(n_echoes, 2, -3) if stop > 3 or stop == n_echoes]
    found = []
    for stop in stops:
        one, middle, other = square[..., stop - 3 : stop]
        t0, t1, t2 = times_ms[stop - 3 : stop]
        bend = np.array([t2 - t1, t0 - t2, t1 - t0])
        share = bend**2 / (bend @ bend)
        power = 0.5 * (one + other) @ share
        variance = ((one - other) @ bend) ** 2 / (2.0 * (bend @ bend))
        darkness = middle.mean(axis=1)
        # A bright partner beyond the border of a dark tissue shows in the echoes before.
        before = square[..., max(stop - 6, 0) : max(stop - 3, 1)].mean(axis=2)
        across = np.maximum(before[0], before[2]) > _ALIKE * np.maximum(before[1], _FLOOR)
        darkness[across] = np.inf
        found.append((darkness, power, variance))
    # Triplet by triplet, so that what lies together in space stays together.
    darkness, power, variance = (np.stack(x, axis=1).ravel() for x in zip(*found, strict=True))
    inside = np.isfinite(darkness)
    return darkness[inside], power[inside], variance[inside]


def _over_parcels(values: Array) -> tuple[float, float]:
    """Mean and its standard error over parcels of neighbours, the outermost parcels left out."""
    edges = np.linspace(0, len(values), _PARCELS + 1).astype(int)
    parcels = np.sort(np.add.reduceat(values, edges[:-1]) / np.diff(edges))
    inner = parcels[_TRIMMED:-_TRIMMED]
    # Winsorised variance gives the standard error of a trimmed mean (Tukey & McLaughlin 1963).
    drawn_in = np.clip(parcels, inner[0], inner[-1])
    se = drawn_in.std(ddof=1) / ((1.0 - 2.0 * _TRIMMED / _PARCELS) * np.sqrt(_PARCELS))
    return float(inner.mean()), float(se)


def _trimmed_share(degrees: int) -> float:
    """Trimmed mean over mean of chi-squares of so many degrees: they are skew."""
    half, outside = 0.5 * max(degrees, 1), _TRIMMED / _PARCELS
    low, high = gammaincinv(half, outside), gammaincinv(half, 1.0 - outside)
    inside = gammainc(half + 1.0, high) - gammainc(half + 1.0, low)
    return float(inside / (1.0 - 2.0 * outside))
