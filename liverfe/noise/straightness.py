"""An upper bound of the number of channels: with too many, decays would bend the wrong way.

Once the noise power ``2n sigma²`` is taken off the mean squares of a parcel of voxels, what is left
is a sum of decays, whose logarithm is straight or bends upwards in echo time, however many tissues
there are. Taking off too much bends it downwards.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.noise.triplets import Triplets

_TRIPLETS_IN_PARCEL = 50
_CLASSES = 8
"""Parcels are of one class of decay, so that few tissues share one."""
_ALIKE = 1.6
"""Partners whose late squares differ by more than this factor lie in two tissues ..."""
_FLOOR = 16.0
"""... which is told where they are above this many sigma²."""
_FEWEST_ECHOES = 3
_FEWEST_PARCELS = 8
_GOOD = 3.0
"""A parcel whose misfit to a parabola is this many SDs above its expectation is left out: fat."""
_SURE = 3.5
"""A bend downwards of any class by this many standard errors speaks against n."""
_ITSELF = 2.0
_LARGER = 1.05
"""Sigma is known to a percent or two: so much larger may n be."""

Array = NDArray[np.float64]


def most_channels_by_straightness(triplets: Triplets, sigma: float, most: int) -> int:
    """Lower an upper bound of n to where the decays of the tissue begin to bend downwards.

    Parameters
    ----------
    triplets : Triplets
        Bright voxels.
    sigma : float
        Noise SD per channel from their bright echoes.
    most : int
        The bound so far.

    Returns
    -------
    int
        The new bound, at least 1.
    """
    if len(triplets.times_ms) < _FEWEST_ECHOES:
        return most
    times = np.asarray((triplets.times_ms - triplets.times_ms.mean()) / np.ptp(triplets.times_ms))
    tissues = []
    for power in _parcel_powers(triplets, sigma):
        bend, _, misfit = _parabolas(power, times, 1)
        power = power[np.isfinite(bend) & (misfit < _GOOD)]
        # What bends downwards with one channel does so for another reason: fat, a field gradient.
        if len(power) >= _FEWEST_PARCELS and _bend(power, times, 1) > -_ITSELF:
            tissues.append(power)
    possible, impossible = 1, most + 1
    while impossible - possible > 1:
        n = (possible + impossible) // 2
        if any(_bend(power, times, n) < -_SURE for power in tissues):
            impossible = n
        else:
            possible = n
    return min(most, int(np.ceil(_LARGER * possible)) if possible > 1 else 1)


def _parcel_powers(triplets: Triplets, sigma: float) -> list[Array]:
    """Mean squares in sigma² of parcels at each echo, shape (P, E), for each class of decay.

    The voxels between say which class.
    """
    square = triplets.square / sigma**2
    late = square[..., square.shape[2] // 2 :].mean(axis=2)
    # Symmetrical in the two partners, so that it lifts neither.
    alike = np.maximum(late[0], late[2]) < _ALIKE * np.maximum(np.minimum(late[0], late[2]), _FLOOR)
    square = square[:, alike]
    order = np.argsort(square[1, :, -1] / square[1, :, 0], kind="stable")
    classes = []
    for rows in np.array_split(order, _CLASSES):
        rows = np.sort(rows)  # neighbours together
        rows = rows[: len(rows) // _TRIPLETS_IN_PARCEL * _TRIPLETS_IN_PARCEL]
        both = 0.5 * (square[0, rows] + square[2, rows])
        classes.append(both.reshape(-1, _TRIPLETS_IN_PARCEL, both.shape[1]).mean(axis=1))
    return classes


def _bend(power: Array, times: Array, n: int) -> float:
    """Mean bend of ``ln(P - 2n)`` in standard errors; below 0 is downwards, 0 if not known."""
    bend, variance, _ = _parabolas(power, times, n)
    known = np.isfinite(bend)
    if known.sum() < _FEWEST_PARCELS:
        return 0.0
    bend, weight = bend[known], 1.0 / variance[known]
    mean = float((weight * bend).sum() / weight.sum())
    scatter = float((weight * (bend - mean) ** 2).sum() / (len(bend) - 1))
    return mean / float(np.sqrt(max(scatter, 1.0) / weight.sum()))


def _parabolas(power: Array, times: Array, n: int) -> tuple[Array, Array, Array]:
    """Bend of ``ln(P - 2n)`` of each parcel, its variance, and the misfit in SDs of chi-square.

    Echoes that do not stand out from the noise power do not count; NaN where too few do.
    """
    left = power - 2.0 * n
    variance = np.maximum(4.0 * power - 4.0 * n, 1.0) / (2.0 * _TRIPLETS_IN_PARCEL)
    shown = left > 3.0 * np.sqrt(variance)
    safe = np.where(shown, left, 1.0)
    weight = np.where(shown, safe**2 / variance, 0.0)
    known = shown.sum(axis=1) >= _FEWEST_ECHOES
    design = np.stack([np.ones_like(times), times, times**2], axis=1)
    normal = np.einsum("pe,ei,ej->pij", weight, design, design)
    normal[~known] = np.eye(3)
    covariance = np.linalg.inv(normal)
    y = np.log(safe)
    coefficients = np.einsum("pij,pe,pe,ej->pi", covariance, weight, y, design, optimize=True)
    rest = y - coefficients @ design.T
    degrees = np.maximum(shown.sum(axis=1) - 3, 1)
    misfit = ((weight * rest**2).sum(axis=1) - degrees) / np.sqrt(2.0 * degrees)
    bend = np.where(known, coefficients[:, 2], np.nan)
    return bend, covariance[:, 2, 2], misfit
