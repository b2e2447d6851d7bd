"""`Sample`: the voxels of a region that take part in questions about the decay."""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.fit import DecayFit
from liverfe.noise import NoiseLevel
from liverfe.regions.correlation import (
    WHITE,
    NoiseCorrelation,
    effective_count,
    noise_correlation,
)
from liverfe.regions.magnitudes import look_up_mean

Mask = NDArray[np.bool_]
Array = NDArray[np.float64]

_MOST_VOXELS = 1500
"""Voxels that take part: their mean residual is known to 0.03 of a standard deviation, which is
less than any fault that moves R2* by 2 % leaves in some echo."""
_GOLDEN = 0.6180339887498949
"""Multiples of the golden ratio spread evenly, and in step with no row or slice of the image."""
_LEAST_SIGMA_SD = 0.03
"""Sigma is never believed better than this here: a floor 3 % too high or low is no fault."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Sample:
    """Voxels of one region.

    Attributes
    ----------
    m : ndarray of float64, shape (V, E)
        Magnitudes in units of each voxel's sigma.
    echo_times_ms : ndarray of float64, shape (E,)
        Echo times, ms.
    n_channels : int
        Effective number of channels.
    sigma_sd : float
        Standard error of sigma, as a share of it.
    inflation : float
        How many of these voxels count as one, because neighbours share noise.
    """

    m: Array
    echo_times_ms: Array
    n_channels: int
    sigma_sd: float
    inflation: float

    def thinned(self, n_voxels: int) -> Sample:
        """At most this many of the voxels, evenly taken."""
        if len(self.m) <= n_voxels:
            return self
        every = np.linspace(0, len(self.m) - 1, n_voxels).astype(np.intp)
        share = n_voxels / len(self.m)
        return dataclasses.replace(
            self, m=self.m[every], inflation=1.0 + share * (self.inflation - 1.0)
        )


def draw_sample(voxels: Mask, stack: EchoStack, noise: NoiseLevel, fit: DecayFit) -> Sample:
    """Take voxels evenly from a region.

    Parameters
    ----------
    voxels : ndarray of bool, shape (X, Y, Z)
        The region's voxels that were not trimmed, at least one.
    stack, noise, fit
        Images, noise and fits.

    Returns
    -------
    Sample
        At most 1,500 voxels.
    """
    chosen = np.flatnonzero(voxels)
    n_all = len(chosen)
    if n_all > _MOST_VOXELS:
        places = np.arange(_MOST_VOXELS) * _GOLDEN % 1.0
        chosen = chosen[np.unique((places * n_all).astype(np.intp))]
    signal = stack.magnitude.reshape(-1, stack.n_echoes)[chosen].astype(np.float64)
    sigma = noise.sigma if noise.sigma_map is None else noise.sigma_map.ravel()[chosen, None]
    share = len(chosen) / n_all
    together = n_all / effective_count(voxels, _correlation(voxels, stack, noise, fit))
    return Sample(
        m=signal / sigma,
        echo_times_ms=stack.echo_times_ms,
        n_channels=noise.n_channels,
        sigma_sd=max(noise.relative_sd, _LEAST_SIGMA_SD),
        # Voxels picked far apart share less noise than neighbours do.
        inflation=1.0 + share * (together - 1.0),
    )


def _correlation(
    voxels: Mask, stack: EchoStack, noise: NoiseLevel, fit: DecayFit
) -> NoiseCorrelation:
    """Correlation of residuals between voxels, from three echoes, each less its own mean.

    Echoes without signal count as the others do, unlike where the noise itself is asked for: what
    is pooled here are residuals, and their correlation there is that of magnitudes.
    """
    fullest = int(np.argmax(voxels.sum(axis=(0, 1))))
    slices = slice(max(fullest - 1, 0), fullest + 2)
    rate, s0 = fit.r2star_per_s[:, :, slices], fit.s0[:, :, slices]
    known = voxels[:, :, slices] & np.isfinite(rate) & (s0 > 0)
    if not known.any():
        return WHITE
    echoes = sorted({0, stack.n_echoes // 3, stack.n_echoes // 2})
    sigma = noise.sigma if noise.sigma_map is None else noise.sigma_map[:, :, slices][known]
    level = s0[known].astype(np.float64) / sigma
    times = stack.echo_times_ms[echoes] * 1e-3
    a = level[:, None] * np.exp(-rate[known].astype(np.float64)[:, None] * times)
    m = stack.magnitude[:, :, slices][known][:, echoes] / np.reshape(sigma, (-1, 1))
    residuals = (m - look_up_mean(a, noise.n_channels)).astype(np.float32)
    share = len(echoes) / stack.n_echoes
    return noise_correlation(
        residuals, np.ones(residuals.shape, dtype=bool), known, taken_up=2.0 * share
    )
