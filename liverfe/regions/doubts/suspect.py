"""`Suspect`: one thing that may have happened to a decay, and how much of a misfit it explains."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from liverfe.regions.doubts.misfit import Misfit, misfit
from liverfe.regions.doubts.sample import Sample
from liverfe.regions.magnitudes import look_up_mean

Array = NDArray[np.float64]
LogFactor = Callable[[Array, Misfit], Array]

_PROBE = 0.01
"""Size of a distortion at which its first effect is read off."""
_ROUNDS = 12
_FARTHEST_LOG = 0.4
"""A step changes ln amplitude by no more than this: further away the first order says little."""
_HALVINGS = 3
_LEAST_VOXELS = 0.5
"""A size that leaves less than this share of the voxels with a decay is none."""
_SETTLED_SE = 0.1
"""A size that moves by less than this share of its standard error has settled."""
_LARGEST_LOG = 9.0
"""A factor of e^9 up or down is the most that a distortion may take out."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Suspect:
    """A distortion of the amplitudes, or other echo times.

    Attributes
    ----------
    kind : str
        Which doubt it stands for.
    n_sizes : int
        How many numbers say how strong it is; they are shared by all voxels.
    log_factor : callable or None
        From sizes and a `Misfit` to the change of ln amplitude, shape (E,) or (V, E).
    echo_times_ms : ndarray of float64, shape (E,), or None
        The other echo times, for a suspect that has no size.
    order : ndarray of int, shape (E,), or None
        The other order of the images, for a suspect that has no size.
    low, high : float
        Between which each size lies.
    choices : int
        Among how many like it this one was picked, which has its price too.
    variant : int
        Tells suspects of one kind apart that are each tried in full.
    facts : dict
        What its words need beside the region and the shift.
    """

    kind: str
    n_sizes: int = 1
    log_factor: LogFactor | None = None
    echo_times_ms: Array | None = None
    order: NDArray[np.intp] | None = None
    low: float = -1.5
    high: float = 1.5
    choices: int = 1
    variant: int = 0
    facts: dict[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Explanation:
    """A suspect with its sizes, and what it leaves unexplained.

    Attributes
    ----------
    suspect : Suspect
        Which.
    sizes : ndarray of float64, shape (n_sizes,)
        How strong, each.
    after : Misfit
        With the distortion taken out.
    """

    suspect: Suspect
    sizes: Array
    after: Misfit

    def aicc(self, scatter: float) -> float:
        """Chi-square of the pulls that are left, with the price of the sizes."""
        return self.after.strain(scatter) + price(self.suspect, self.after.basis.shape[1])


def price(suspect: Suspect, degrees: int) -> float:
    """What AICc takes for a suspect's free sizes, of `degrees` pulls to explain; maybe infinite.

    Picking the best of c alike is worth ``2 ln c`` more.
    """
    k = suspect.n_sizes
    spare = degrees - k - 1
    if k and spare <= 0:
        return math.inf
    small_sample = 2.0 * k * (k + 1) / spare if k else 0.0
    return 2.0 * k + small_sample + 2.0 * math.log(suspect.choices)


def first_look(suspect: Suspect, found: Misfit) -> float:
    """AICc of a distortion to first order, from the residuals as they stand: no fit."""
    effects = _effects(suspect, np.zeros(suspect.n_sizes), found)
    sizes, left, _ = _regress(found.pulls, effects, found)
    if suspect.low >= 0 and (sizes < 0).any():
        return math.inf
    return left + price(suspect, found.basis.shape[1])


def explain(suspect: Suspect, sample: Sample, found: Misfit) -> Explanation:
    """Take a suspect's distortion out of the signal and see what is left.

    Parameters
    ----------
    suspect : Suspect
        A distortion, whose sizes are found by Gauss-Newton steps on the pooled residuals, or other
        echo times or another order, which are tried as they are.
    sample, found
        The region's voxels and their misfit.

    Returns
    -------
    Explanation
        The best sizes.
    """
    if suspect.log_factor is None:
        m = sample.m if suspect.order is None else sample.m[:, suspect.order]
        after = misfit(sample, m, suspect.echo_times_ms)
        return Explanation(suspect=suspect, sizes=np.zeros(0), after=after)
    sizes = np.zeros(suspect.n_sizes)
    best, left = found, found.strain(1.0)
    for _ in range(_ROUNDS):
        step, _, se = _regress(best.pulls, _effects(suspect, sizes, best), best)
        step = _bounded(step, suspect, sizes, best)
        moved = False
        for _ in range(_HALVINGS):
            trial = np.clip(sizes + step, suspect.low, suspect.high)
            after = misfit(sample, _taken_out(suspect, trial, sample, best))
            # Compared at one scatter: a good explanation makes the voxels scatter less, too.
            if after.strain(1.0) < left and len(after.z) > _LEAST_VOXELS * len(found.z):
                sizes, best, left, moved = trial, after, after.strain(1.0), True
                break
            step = step / 2.0
        if not moved or (np.abs(step) < _SETTLED_SE * se).all():
            break
    return Explanation(suspect=suspect, sizes=sizes, after=best)


def _bounded(step: Array, suspect: Suspect, sizes: Array, found: Misfit) -> Array:
    here = distortion(suspect, sizes, found)
    for _ in range(20):
        there = distortion(suspect, np.clip(sizes + step, suspect.low, suspect.high), found)
        if float(np.atleast_2d(np.abs(there - here)).max(axis=1).mean()) <= _FARTHEST_LOG:
            break
        step = step / 2.0
    return step


def distortion(suspect: Suspect, sizes: Array, found: Misfit) -> Array:
    """Change of ln amplitude that a suspect of these sizes makes; shape (E,) or (V, E)."""
    assert suspect.log_factor is not None
    return np.clip(suspect.log_factor(sizes, found), -_LARGEST_LOG, _LARGEST_LOG)


def _effects(suspect: Suspect, sizes: Array, found: Misfit) -> Array:
    """Pulls per unit of each size, around `sizes`; shape (E, n_sizes).

    `found` is the misfit of the signal with `sizes` taken out, so its amplitudes are the clean
    ones.
    """
    base = distortion(suspect, sizes, found)
    columns = []
    for i in range(suspect.n_sizes):
        probe = sizes.copy()
        probe[i] += _PROBE
        change = (distortion(suspect, probe, found) - base) / _PROBE
        columns.append(
            found.response @ change
            if change.ndim == 1
            else found.pooled(found.level.slope * change)
        )
    return np.stack(columns, axis=1)


def _taken_out(suspect: Suspect, sizes: Array, sample: Sample, found: Misfit) -> Array:
    """The sample's magnitudes without the distortion; the noise stays as it is."""
    n = sample.n_channels
    distorted = look_up_mean(found.a * np.exp(distortion(suspect, sizes, found)), n)
    m = sample.m.copy()
    m[found.kept] -= distorted - found.level.mean
    return np.maximum(m, 0.0)


def _regress(pulls: Array, effects: Array, found: Misfit) -> tuple[Array, float, Array]:
    """Generalised least squares of the pulls on `effects`: sizes, what is left, their SE."""
    along, columns = found.basis.T @ pulls, found.basis.T @ effects
    covariance = found.covariance(1.0)
    weight = np.linalg.solve(covariance, columns)
    information = columns.T @ weight
    inverse = np.linalg.pinv(information)
    sizes = inverse @ (weight.T @ along)
    left = along - columns @ sizes
    strain = float(left @ np.linalg.solve(covariance, left))
    return sizes, strain, np.sqrt(np.maximum(np.diag(inverse), 0.0))
