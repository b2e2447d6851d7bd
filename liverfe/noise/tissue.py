"""What the tissue says of the noise: sigma, how it varies, and how many channels there are."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.noise.channels import Channels, channels_of_tissue
from liverfe.noise.dark_tissue import channels_of_dark_tissue
from liverfe.noise.joint import DecayLikelihood, fit_jointly, parcels_of
from liverfe.noise.level import NoiseCandidate
from liverfe.noise.residual import Residuals, residuals
from liverfe.noise.triplets import Triplets, bright_triplets
from liverfe.noise.variation import Variation, sigma_variation

_NEARLY = 0.16
"""The number of channels of the air may lie outside what the tissue allows by this share."""
_SURER, _MUCH_SURER = 1.5, 4.0
"""How many times beyond their own bounds dark echoes must deny a number that the air tells."""
_OVER_FIRST_ECHO = 50.0
"""Where nothing else is known the joint likelihood first looks at the median first echo over this,
..."""
_FACTORS = 2.0 ** np.arange(-4, 5)
"""... and at these multiples of it."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Tissue:
    """Bright voxels, with sigma taken out as far as it varies; each answer is worked out once.

    Attributes
    ----------
    triplets : Triplets
        The voxels.
    likelihood : DecayLikelihood or None
        How well decays fit.
    start_sigma : float or None
        Where to look first.
    """

    triplets: Triplets
    likelihood: DecayLikelihood | None = None
    start_sigma: float | None = None
    _residuals: dict[int, Residuals] = field(default_factory=dict)

    @classmethod
    def of(
        cls, stack: EchoStack, *, likelihood: DecayLikelihood | None, start_sigma: float | None
    ) -> Tissue:
        """All tissue of a stack."""
        return cls(triplets=bright_triplets(stack), likelihood=likelihood, start_sigma=start_sigma)

    def in_units_of(self, relative_sigma: NDArray[np.float32]) -> Tissue:
        """The same tissue with the variation of sigma taken out."""
        return Tissue(
            triplets=self.triplets.in_units_of(relative_sigma),
            likelihood=self.likelihood,
            start_sigma=self.start_sigma,
        )

    def residuals(self, n_channels: int) -> Residuals:
        """Residuals for a number of channels."""
        if n_channels not in self._residuals:
            known = [found.sigma for found in self._residuals.values() if found.sigma]
            self._residuals[n_channels] = residuals(
                self.triplets,
                start_sigma=known[-1] if known else self.start_sigma,
                n_channels=n_channels,
            )
        return self._residuals[n_channels]

    def variation(self, n_channels: int, shape: tuple[int, int, int]) -> Variation | None:
        """How sigma varies over the image."""
        return sigma_variation(self.triplets, self.residuals(n_channels), shape)

    def channels(self, *, by_likelihood: bool) -> Channels | None:
        """How many channels there may be."""
        likelihood = self.likelihood if by_likelihood else None
        return channels_of_tissue(self.triplets, self.residuals, likelihood)

    def allows(self, n_channels: int, *, at_odds: bool = False) -> bool:
        """Whether the dark echoes agree with a number of channels, or tell nothing.

        `at_odds`: all else speaks for the number, so they must be surer still to deny it. Their
        error is known to a factor only, as voxels of interpolated images share their noise.
        """
        sigma = self.residuals(n_channels).sigma
        bounds = channels_of_dark_tissue(self.triplets, sigma) if sigma else None
        if bounds is None:
            return True
        # Against air that has told n the tissue must be surer than where it has to guess.
        surer = _MUCH_SURER if at_odds else _SURER
        low = bounds.channels - surer * (bounds.channels - bounds.fewest)
        high = bounds.channels + surer * (bounds.most - bounds.channels)
        return bool(low * (1.0 - _NEARLY) <= n_channels <= high * (1.0 + _NEARLY))

    def joint(self, n_channels: int) -> NoiseCandidate:
        """Sigma by the joint likelihood."""
        parcels = parcels_of(self.triplets)
        if self.likelihood is None or parcels is None or len(self.triplets.times_ms) < 3:
            return _closed("too few voxels or echoes with any signal")
        sigma = self.residuals(n_channels).sigma or self.start_sigma
        if sigma is None:
            first = float(np.median(parcels.signal[..., 0])) / _OVER_FIRST_ECHO
            rough = [
                fit_jointly(parcels, self.likelihood, sigma=first * x, n_channels=n_channels)
                for x in _FACTORS
            ]
            likely = [fit for fit in rough if fit is not None]
            if not likely:
                return _closed("no decay fits")
            sigma = max(likely, key=lambda fit: float(np.nansum(fit.log_likelihood))).sigma
        found = fit_jointly(parcels, self.likelihood, sigma=sigma, n_channels=n_channels)
        if found is None:
            return _closed("no decay fits")
        return NoiseCandidate(
            method="joint",
            sigma=found.sigma,
            n_channels=n_channels,
            relative_sd=found.relative_sd,
            n_voxels=parcels.signal.shape[0] * parcels.signal.shape[1],
            remark=f"likelihood {np.nansum(found.log_likelihood):.1f} of all echoes together",
        )


def _closed(remark: str) -> NoiseCandidate:
    return NoiseCandidate(
        method="joint", sigma=None, n_channels=1, relative_sd=None, n_voxels=0, remark=remark
    )
