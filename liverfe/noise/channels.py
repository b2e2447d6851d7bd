"""How many channels the tissue itself shows, where no air tells it.

Two witnesses. Dark echoes say between which numbers n must lie, without a model of the decay
(`dark_tissue`). Within that the likelihood of single exponentials (`joint`) says which number is
best; but decays that are curved look like more channels, so it may only lower the upper bound, and
choose where the dark echoes rule out one channel.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from liverfe.noise.dark_tissue import channels_of_dark_tissue
from liverfe.noise.joint import DecayLikelihood, JointFit, Parcels, fit_jointly, parcels_of
from liverfe.noise.moments import MOST_CHANNELS
from liverfe.noise.residual import Residuals
from liverfe.noise.straightness import most_channels_by_straightness
from liverfe.noise.triplets import Triplets

_ROUNDS = 6
_UNLIKELY = 0.83
"""One channel is held on to as long as it lies within this share of the way to its bound."""
_TOLD = 0.16
"""n is told if it can be only this share larger or smaller: the floor moves by half of it."""
_HOLDS = 0.12
"""A parcel whose own sigma differs by more from that of the residuals does not decay as single
exponentials do, and has no say about n."""
_FEWEST_PARCELS = 5

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, kw_only=True)
class Channels:
    """How many channels there may be.

    Attributes
    ----------
    n : int
        The best number; 1 where nothing speaks against it.
    fewest, most : int
        Between these it lies.
    """

    n: int
    fewest: int
    most: int

    @property
    def are_told(self) -> bool:
        """Whether the range is as good as a number."""
        return self.most - self.fewest <= 2.0 * _TOLD * self.n


def channels_of_tissue(
    triplets: Triplets,
    residuals_at: Callable[[int], Residuals],
    likelihood: DecayLikelihood | None = None,
) -> Channels | None:
    """Find how many channels the tissue allows, and the best number among them.

    Parameters
    ----------
    triplets : Triplets
        Bright voxels.
    residuals_at : callable
        Their residuals for a number of channels.
    likelihood : DecayLikelihood or None
        How well single exponentials fit, to choose the number within a narrow range; None: the
        dark echoes alone choose.

    Returns
    -------
    Channels or None
        None where sigma is not known from bright echoes.
    """
    known = _by_dark_echoes(triplets, residuals_at)
    parcels = parcels_of(triplets)
    if known is None or likelihood is None or parcels is None or known.fewest in (1, known.most):
        return known
    return _best(known, _Likelihoods(parcels, residuals_at, likelihood))


def _by_dark_echoes(
    triplets: Triplets, residuals_at: Callable[[int], Residuals]
) -> Channels | None:
    """Sigma hangs a little on n, and n on sigma: ask for both until they agree."""
    n, one_is_possible, sigma = 1, True, 0.0
    for _ in range(_ROUNDS):
        found = residuals_at(n).sigma
        bounds = channels_of_dark_tissue(triplets, found) if found else None
        if bounds is None or found is None:
            return None
        sigma = found
        fewest = int(np.clip(np.ceil(bounds.fewest), 1, MOST_CHANNELS))
        most = int(np.clip(np.floor(bounds.most), 1, MOST_CHANNELS))
        best = int(np.clip(np.rint(bounds.channels), 1, MOST_CHANNELS))
        if n == 1:
            one_is_possible = bounds.fewest <= 1.0
            if bounds.channels - 1.0 <= _UNLIKELY * (bounds.channels - bounds.fewest):
                break
        if best == n:
            break
        n = best
    fewest, most = min(fewest, n), max(most, n)
    if n > 1 and one_is_possible:
        # Sigma with one channel is smaller, and that leaves room for one.
        n, fewest = (n if fewest > 2 else 1), 1
    if most > fewest:
        most = max(fewest, most_channels_by_straightness(triplets, sigma, most))
    return Channels(n=min(n, most), fewest=fewest, most=most)


class _Likelihoods:
    """Likelihoods of numbers of channels, each worked out once, by the parcels that hold."""

    def __init__(
        self,
        parcels: Parcels,
        residuals_at: Callable[[int], Residuals],
        likelihood: DecayLikelihood,
    ) -> None:
        self._parcels, self._residuals_at, self._likelihood = parcels, residuals_at, likelihood
        self._fits: dict[int, JointFit] = {}
        self._hold = np.zeros(len(parcels.signal), dtype=bool)

    def try_one(self, n: int) -> bool:
        """Whether the tissue, or enough of it, decays as single exponentials with n channels."""
        sigma = self._residuals_at(n).sigma
        if n not in self._fits and sigma is not None:
            fit = fit_jointly(self._parcels, self._likelihood, sigma=sigma, n_channels=n)
            if fit is not None:
                self._fits[n] = fit
                self._hold |= np.abs(np.log(fit.parcel_sigma / sigma)) < _HOLDS
        return n in self._fits and self._hold.sum() >= _FEWEST_PARCELS

    def better(self, one: int, other: int) -> bool:
        """Whether `one` is more likely than `other` at all."""
        return bool(np.nansum(self._gain(one, other)) > 0.0)

    def peak(self, numbers: tuple[int, int, int]) -> float:
        """Where the parabola through three numbers has its maximum; the best of them if none."""
        first, middle, last = numbers
        left = float(np.nansum(self._gain(middle, first))) / (middle - first)
        right = float(np.nansum(self._gain(last, middle))) / (last - middle)
        bend = (right - left) / (last - first)
        if bend >= 0.0:
            return float(last if self.better(last, first) else first)
        return 0.5 * (first + middle) - 0.5 * left / bend

    def _gain(self, one: int, other: int) -> Array:
        return np.asarray(
            (self._fits[one].log_likelihood - self._fits[other].log_likelihood)[self._hold]
        )


def _best(known: Channels, witness: _Likelihoods) -> Channels:
    """Choose the most likely number of a narrow range."""
    first, last = known.fewest, known.most
    middle = (first + last) // 2
    if not known.are_told or not all(witness.try_one(n) for n in {first, middle, last}):
        return known
    if last - first == 1:
        return replace(known, n=first if witness.better(first, last) else last)
    best = witness.peak((first, middle, last))
    return replace(known, n=int(np.clip(np.rint(best), first, last)))
