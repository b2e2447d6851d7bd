"""The noise's correlation about a region, from its own voxels and the tissue around it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import uniform_filter

from liverfe.echoes import EchoStack
from liverfe.fit import DecayFit, FitOutcome, clear_amplitude
from liverfe.noise import NoiseLevel
from liverfe.regions.correlation import (
    WHITE,
    NoiseCorrelation,
    bounding_box,
    noise_correlation,
)
from liverfe.regions.magnitudes import look_up_mean

Mask = NDArray[np.bool_]
Array = NDArray[np.float64]

_MARGIN = 16
"""Voxels around a region that are looked at too: a small region alone would not tell."""
_MOST_ECHOES = 6
"""The first echoes are looked at: they have signal everywhere."""
_CLEAR = 0.85
"""Echoes count from this share of information on (2 sigma, one channel): below, the correlation of
magnitudes falls behind that of the noise itself."""
_CHI2_SE = 2.5
"""Voxels whose misfit lies this many standard deviations above 1 do not count: what is left over
there is more than noise."""
_LOCAL = 11
"""Width in voxels of the mean that is taken off where only the map of R2* is left."""
_NEAR = 3
"""Neighbours nearer than this many voxels are looked at there."""
_REACH = 6.0
"""Single voxels count up to this many MADs from the median."""


def correlation_around(
    mask: Mask, stack: EchoStack, noise: NoiseLevel, fit: DecayFit
) -> NoiseCorrelation:
    """Measure the correlation of the noise in and around a region.

    Parameters
    ----------
    mask : ndarray of bool, shape (X, Y, Z)
        The region's voxels, at least one.
    stack : EchoStack
        The images.
    noise : NoiseLevel
        Their noise.
    fit : DecayFit
        Their fits, voxel by voxel.

    Returns
    -------
    NoiseCorrelation
        From residuals; with two echoes, which leave none, from R2* itself less a local mean.
    """
    if stack.n_echoes == 2:
        return _correlation_of_map(mask, fit)
    box = _box_around(mask)
    worst = 1.0 + _CHI2_SE * np.sqrt(2.0 / (stack.n_echoes - 2))
    known = (fit.outcome[box] == FitOutcome.CONVERGED) & (fit.reduced_chi2[box] < worst)
    if not known.any():
        return WHITE
    sigma = noise.sigma if noise.sigma_map is None else noise.sigma_map[box][known]
    rate = fit.r2star_per_s[box][known].astype(np.float64)
    level = fit.s0[box][known].astype(np.float64) / sigma
    a = level[:, None] * np.exp(-1e-3 * rate[:, None] * stack.echo_times_ms[:_MOST_ECHOES])
    usable = a >= clear_amplitude(noise.n_channels, share=_CLEAR)
    usable &= usable.sum(axis=1, keepdims=True) > 2
    m = stack.magnitude[box][known][:, : a.shape[1]] / np.reshape(sigma, (-1, 1))
    residuals = (m - look_up_mean(a, noise.n_channels)).astype(np.float32)
    return noise_correlation(residuals, usable, known)


def _box_around(mask: Mask) -> tuple[slice, ...]:
    """The region's fullest slice and its neighbours, with a margin in the plane."""
    x, y, _ = bounding_box(mask)
    fullest = int(np.argmax(mask.sum(axis=(0, 1))))
    return (
        slice(max(x.start - _MARGIN, 0), x.stop + _MARGIN),
        slice(max(y.start - _MARGIN, 0), y.stop + _MARGIN),
        slice(max(fullest - 1, 0), fullest + 2),
    )


def _correlation_of_map(mask: Mask, fit: DecayFit) -> NoiseCorrelation:
    """Correlation of the region's R2* itself, less the mean over neighbours of the region.

    A pattern of iron as fine as a few voxels counts as noise here.
    """
    box = bounding_box(mask)
    known = mask[box] & (fit.outcome[box] == FitOutcome.CONVERGED)
    if not known.any():
        return WHITE
    rate, se = (
        field[box][known].astype(np.float64) for field in (fit.r2star_per_s, fit.r2star_se_per_s)
    )
    noise = float(np.median(se))
    middle = float(np.median(rate))
    reach = _REACH * float(np.median(np.abs(rate - middle)))
    image = np.zeros(known.shape)
    image[known] = np.clip(rate - middle, -reach, reach)
    width = (_LOCAL, _LOCAL, 1)
    share = uniform_filter(known.astype(np.float64), width, mode="constant")[known]
    mean = uniform_filter(image, width, mode="constant")[known] / share
    values = (image[known] - mean) / noise
    found = noise_correlation(
        values[:, None], np.ones((len(values), 1), dtype=bool), known, taken_up=0.0,
        averaged=max(round(float(share.mean()) * _LOCAL**2), 2),
    )  # fmt: skip
    # Iron that differs from voxel to voxel dilutes it: noise alone has a mean square of 1.
    in_plane = np.clip(found.in_plane * max(float((values**2).mean()), 1.0), -1.0, 1.0)
    # One image tells the near neighbours only; what interpolation takes back further out is left.
    in_plane[_NEAR:], in_plane[:, _NEAR:] = 0.0, 0.0
    return NoiseCorrelation(in_plane=in_plane, between_slices=found.between_slices)
