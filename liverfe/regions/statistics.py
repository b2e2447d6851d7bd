"""Statistics of voxels of which some are only known to lie beyond a limit."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

Array = NDArray[np.float64]

_MAD_TO_SD = 1.4826
"""Scaled to the SD of a normal distribution: 1 / Phi^-1(3/4)."""
_LONGEST_LAG = 3
"""Correlation of neighbouring voxels is looked for up to this distance."""


def censored_quantile(values: Array, share: float) -> float:
    """Quantile of a sorted sample whose ends may be infinite (censored).

    Parameters
    ----------
    values : ndarray of float64, shape (N,)
        Ascending; ``-inf`` under a limit, ``inf`` over it; at least one.
    share : float
        0 to 1.

    Returns
    -------
    float
        Linear between order statistics; infinite where the quantile lies among censored values.
    """
    place = share * (len(values) - 1)
    below = int(np.floor(place))
    above = min(below + 1, len(values) - 1)
    part = place - below
    if part == 0.0 or values[below] == values[above]:
        return float(values[below])
    return float(values[below] + part * (values[above] - values[below]))


def median_interval(values: Array, *, level: float, inflation: float) -> tuple[float, float]:
    """Interval of the median from order statistics, which needs no distribution.

    Parameters
    ----------
    values : ndarray of float64, shape (N,)
        Ascending, censored ends infinite.
    level : float
        Coverage, for example 0.95.
    inflation : float
        How many correlated voxels count as one (`correlation_inflation`).

    Returns
    -------
    low, high : float
        Infinite where they lie among censored values.
    """
    half = float(ndtri(0.5 + level / 2.0)) / (2.0 * np.sqrt(len(values) / inflation))
    low, high = max(0.5 - half, 0.0), min(0.5 + half, 1.0)
    return censored_quantile(values, low), censored_quantile(values, high)


def outliers(values: Array, mads: float) -> NDArray[np.bool_]:
    """Which finite values lie further than `mads` scaled MADs from the median.

    Censored (infinite) values take part in median and MAD, at their ends, and are never outliers:
    dropping them would pull the result towards the rest.
    """
    ordered = np.sort(values)
    middle = censored_quantile(ordered, 0.5)
    if not np.isfinite(middle):
        return np.zeros(len(values), dtype=bool)
    spread = censored_quantile(np.sort(np.abs(values - middle)), 0.5)
    if not np.isfinite(spread) or spread == 0.0:
        return np.zeros(len(values), dtype=bool)
    far = np.abs(values - middle) > mads * _MAD_TO_SD * spread
    return np.asarray(far & np.isfinite(values))


def correlation_inflation(values: NDArray[np.floating], mask: NDArray[np.bool_]) -> float:
    """How many voxels count as one, from the correlation of in-plane neighbours.

    Interpolated images repeat the same noise in neighbouring voxels; a region's interval from the
    plain count would then be too narrow. The sum ``1 + 2 sum rho(h)`` over positive, significant
    correlations is taken along each image axis and the two multiplied.

    Parameters
    ----------
    values : ndarray of float64, shape (X, Y, Z)
        Map; only read inside `mask`.
    mask : ndarray of bool, shape (X, Y, Z)
        The voxels.

    Returns
    -------
    float
        At least 1.
    """
    inside = np.argwhere(mask)
    if len(inside) < 2:
        return 1.0
    box = tuple(
        slice(low, high + 1) for low, high in zip(inside.min(0), inside.max(0), strict=True)
    )
    known = mask[box]
    deviation = np.where(known, values[box] - np.median(values[mask]), 0.0)
    variance = (deviation[known] ** 2).mean()
    if not variance > 0:
        return 1.0
    product = 1.0
    for axis in (0, 1):
        total = 1.0
        for lag in range(1, _LONGEST_LAG + 1):
            if known.shape[axis] <= lag:
                break
            here = [slice(None)] * 3
            there = [slice(None)] * 3
            here[axis], there[axis] = slice(None, -lag), slice(lag, None)
            pair = known[tuple(here)] & known[tuple(there)]
            n_pairs = int(pair.sum())
            if n_pairs < 10:
                break
            covariance = (deviation[tuple(here)] * deviation[tuple(there)])[pair].mean()
            rho = float(covariance / variance)
            if rho < 2.0 / np.sqrt(n_pairs):
                break
            total += 2.0 * rho
        product *= total
    return max(product, 1.0)
