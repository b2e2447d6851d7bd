"""Sigma from the residuals of a decay, in voxels and echoes with high signal.

There the noise of a magnitude is Gaussian with SD sigma for any number of channels, so this works
without background air and measures the noise where the tissue is.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtri

from liverfe.echoes import EchoStack
from liverfe.noise.level import NoiseCandidate

_BRIGHT_SHARE = 0.3
"""Voxels brighter at the first echo than this share of the brightest percent are tissue."""
_HIGH_SIGNAL = 8.0
"""Echoes above this many sigma count: there the magnitude is Gaussian to 1 % in SD."""
_FEWEST_ECHOES = 3
_ENOUGH_VOXELS = 200
_MOST_VOXELS = 60_000
_LEAST_RELATIVE_SD = 0.02
"""Sigma from residuals is never believed better than this: the model is not exact either."""
_ROUNDS = 8

Array = NDArray[np.float64]


def sigma_from_residuals(stack: EchoStack, *, start_sigma: float | None = None) -> NoiseCandidate:
    """Estimate sigma from residuals of log-linear decays.

    Each voxel's leading echoes above `_HIGH_SIGNAL` sigma are fitted by a log-linear line weighted
    by M²; the weighted residual sum of squares is sigma² times chi-square with N - 2 degrees. The
    median over voxels keeps vessels and artefacts out.

    Parameters
    ----------
    stack : EchoStack
        Magnitudes in true values.
    start_sigma : float or None
        Where to start the iteration between sigma and the echoes that count.

    Returns
    -------
    NoiseCandidate
        Sigma, or None with a remark that says why there is none.
    """
    if stack.n_echoes < _FEWEST_ECHOES:
        return _closed("two echoes leave no residual")
    signal = _bright_voxels(stack)
    if len(signal) < _ENOUGH_VOXELS:
        return _closed("too few voxels with high signal")
    sigma = start_sigma or float(np.median(signal[:, 0])) / 50.0
    n_voxels, degrees = 0, 0
    for _ in range(_ROUNDS):
        leading = np.cumprod(signal > _HIGH_SIGNAL * sigma, axis=1).sum(axis=1)
        enough = leading >= _FEWEST_ECHOES
        n_voxels = int(enough.sum())
        if n_voxels < _ENOUGH_VOXELS:
            return _closed("too few voxels with three echoes of high signal", n_voxels)
        kept = leading[enough]
        rss = _weighted_rss(signal[enough], stack.echo_times_ms, kept)
        middle = np.array([chdtri(max(k - 2, 1), 0.5) for k in range(stack.n_echoes + 1)])
        updated = float(np.sqrt(np.median(rss / middle[kept])))
        degrees = int((kept - 2).sum())
        if not updated > 0:
            return _closed("the residuals are exactly zero", n_voxels)
        settled = abs(updated - sigma) < 1e-3 * sigma
        sigma = updated
        if settled:
            break
    return NoiseCandidate(
        method="residual",
        sigma=sigma,
        n_channels=1,
        relative_sd=max(1.3 / float(np.sqrt(2.0 * degrees)), _LEAST_RELATIVE_SD),
        n_voxels=n_voxels,
        remark="residuals of echoes with high signal, median over voxels",
    )


def _bright_voxels(stack: EchoStack) -> NDArray[np.float32]:
    signal = stack.magnitude[:, :, stack.complete_slices].reshape(-1, stack.n_echoes)
    signal = signal[np.isfinite(signal).all(axis=1)]
    if not len(signal):
        return signal
    bright = signal[signal[:, 0] > _BRIGHT_SHARE * np.percentile(signal[:, 0], 99.0)]
    return bright[:: max(1, len(bright) // _MOST_VOXELS)]


def _weighted_rss(signal: NDArray[np.float32], times_ms: Array, kept: NDArray[np.int64]) -> Array:
    """Weighted residual sum of squares of ln M over the first `kept` echoes of each row."""
    used = np.arange(signal.shape[1]) < kept[:, None]
    m = np.where(used, signal, 1.0).astype(np.float64)
    w = np.where(used, m**2, 0.0)
    y, t = np.log(m), times_ms[None, :]
    total = w.sum(axis=1, keepdims=True)
    mean_t = (w * t).sum(axis=1, keepdims=True) / total
    mean_y = (w * y).sum(axis=1, keepdims=True) / total
    dt, dy = t - mean_t, y - mean_y
    slope = (w * dt * dy).sum(axis=1, keepdims=True) / (w * dt**2).sum(axis=1, keepdims=True)
    return np.asarray((w * (dy - slope * dt) ** 2).sum(axis=1))


def _closed(remark: str, n_voxels: int = 0) -> NoiseCandidate:
    return NoiseCandidate(
        method="residual", sigma=None, n_channels=1, relative_sd=None, n_voxels=n_voxels,
        remark=remark,
    )  # fmt: skip
