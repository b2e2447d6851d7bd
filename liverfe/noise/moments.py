"""Moments of what is taken for noise: the same in every voxel and at every echo, if it is that."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

_SAME_IN_VOXELS = (0.6, 1.5)
"""Variance between voxels over what the variance within them predicts: 1 for pure noise."""
_NEIGHBOURS = 64
"""Voxels in a row whose mean is compared with the others': what no single voxel shows, they do."""
_SAME_IN_ECHOES = 1.10
"""Largest over smallest mean square of the echoes: 1 for pure noise."""
BY_CHANCE = 4.0
"""Limits may be exceeded by this many standard errors."""
MOST_CHANNELS = 64

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Moments:
    """First and second moments of M² in voxels that are taken for noise."""

    mean_square: float
    variance_of_square: float
    between_over_within: float
    unevenness: float
    echo_spread: float
    n_voxels: int
    n_echoes: int

    @property
    def channels(self) -> float:
        """Central chi: M²/sigma² is chi-square with 2n degrees, so n = mean² / variance."""
        variance = self.variance_of_square
        return self.mean_square**2 / variance if variance > 0 else float(MOST_CHANNELS)

    @property
    def is_even(self) -> bool:
        """Whether voxels differ no more than the echoes of one voxel do."""
        return _SAME_IN_VOXELS[0] <= self.between_over_within <= self.between_limit

    @property
    def between_limit(self) -> float:
        """Largest believable `between_over_within`, with its standard error for chi-squares."""
        kurtosis = 2.0 * 6.0 / self.channels / self.n_echoes
        se = np.sqrt((2.0 + 2.0 / (self.n_echoes - 1) + kurtosis) / self.n_voxels)
        return float(_SAME_IN_VOXELS[1] + BY_CHANCE * se)

    @property
    def echo_limit(self) -> float:
        """Largest believable `echo_spread`: a mean of N chi-squares varies by 1 / sqrt(n N)."""
        return float(_SAME_IN_ECHOES + BY_CHANCE / np.sqrt(self.channels * self.n_voxels))


def moments_of(square: Array) -> Moments:
    """Moments of squares of magnitudes, shape (V, E): within voxels and between them."""
    n_voxels, n_echoes = square.shape
    within = square.var(axis=1, ddof=1).mean()
    between = square.mean(axis=1).var(ddof=1) * n_echoes
    per_echo = square.mean(axis=0)
    return Moments(
        mean_square=float(square.mean()),
        variance_of_square=float(within),
        between_over_within=float(between / within) if within > 0 else np.inf,
        unevenness=_unevenness(square.mean(axis=1), within / n_echoes),
        echo_spread=float(per_echo.max() / per_echo.min()),
        n_voxels=n_voxels,
        n_echoes=n_echoes,
    )


def _unevenness(level: Array, variance: float) -> float:
    """SD of the level from place to place as a share of it, less what chance explains."""
    n_rows = len(level) // _NEIGHBOURS
    if n_rows < 2:
        return 0.0
    rows = level[: n_rows * _NEIGHBOURS].reshape(n_rows, -1).mean(axis=1)
    by_chance = variance / _NEIGHBOURS * (1.0 + BY_CHANCE * np.sqrt(2.0 / n_rows))
    return float(np.sqrt(max(rows.var(ddof=1) - by_chance, 0.0)) / level.mean())
