"""Statistics of voxels of which some are only known to lie beyond a limit."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

_MAD_TO_SD = 1.4826
"""Scaled to the SD of a normal distribution: 1 / Phi^-1(3/4)."""


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
    if values[below] == -np.inf:  # nothing to interpolate from; beside voxels over the limit, over
        return float("inf") if values[above] == np.inf else float("-inf")
    return float(values[below] + part * (values[above] - values[below]))


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
