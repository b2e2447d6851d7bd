"""Sigma from background air: voxels in which every echo is nothing but noise.

In air all echoes of a voxel are draws from one and the same distribution, so the E echoes act as E
repeats. Voxels are taken as air if their signal does not fall with echo time and their mean square
fits one common noise level; the whole lot is believed only if it then behaves as noise of coils
does (the same in every voxel and at every echo).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaincinv, gammaln, stdtrit
from skimage.filters import threshold_otsu

from liverfe.echoes import EchoStack
from liverfe.noise.level import NoiseCandidate
from liverfe.noise.moments import BY_CHANCE, MOST_CHANNELS, Moments, moments_of

_ENOUGH_VOXELS = 400
"""Below this many air voxels the number of channels cannot be told."""
_MOST_VOXELS = 60_000
"""More voxels add nothing: sigma is then known to 0.1 %."""
_MASKED = 0.02
"""Share of voxels that are zero at every echo from which the scanner is taken to have done it."""
_NARROWED = 0.7
"""The number of channels seen at first, taken down by this, widens the bounds of their level."""
_TREND_CHANCE = 0.01
"""A voxel whose signal falls with echo time more than noise does by this chance is no air; those
that rise as much go too, or the rest would rise."""
_TAIL = 0.005
"""Share of true noise voxels that the selection by mean square may lose at each end."""
_UNEVEN = 0.15
"""Sigma² may differ over the image by this share (SD): a ghost over half of the air that does so
makes sigma 8 % too high."""
_STANDS_OUT = 10.0
"""Amplitude of the brightest percent in sigma. Where nothing is so bright, what is darkest may be
tissue, whose few echoes at low signal look like the noise of many channels."""
_NATURAL_ZEROS = 4.0
"""Exact zeros up to this many times what quantisation explains are noise, more are a mask."""
_LEAST_RELATIVE_SD = 0.005
"""Sigma is never known better than this: air differs over the image."""
_ECHOES_TO_HALVE = 4
_SEVERAL_CHANNELS = 1.2
"""Below this many effective channels there is no constant to speak of."""
_SKEWER = 0.12
"""A skewness this much above that of the channels says that there is a constant instead; channels
whose noise is correlated differ by less."""
_RAYLEIGH_MEAN_OVER_SD = 1.913
"""Mean over SD of the noise of one channel, sqrt(pi / (4 - pi)) (Koay 2006)."""
_RAYLEIGH_SKEWNESS = 0.6311
"""Skewness of the noise of one channel."""
_ZEROED = "the scanner set the background to zero"
_CLIPPED = "part of the background was set to zero"

Array = NDArray[np.float64]


def sigma_from_air(
    stack: EchoStack,
    *,
    n_channels: int | None = None,
    relative_sigma: NDArray[np.float32] | None = None,
) -> NoiseCandidate:
    """Estimate sigma and the number of channels from background air.

    Parameters
    ----------
    stack : EchoStack
        Magnitudes in true values.
    n_channels : int or None
        Effective number of channels if known; None: from the background itself,
        ``n = mean(M²)² / var(M²)`` to the nearest whole number.
    relative_sigma : ndarray of float32, shape (X, Y, Z), or None
        How sigma varies over the image, if it does; the result is the sigma where this is 1.

    Returns
    -------
    NoiseCandidate
        ``sigma² = mean(M²) / 2n`` (Constantinides 1997), or sigma None and a remark that says why
        there is no usable air.
    """
    signal = _voxels(stack, relative_sigma)
    masked = (signal == 0).all(axis=1)
    is_masked = bool(
        masked.mean() > _MASKED and (~masked).sum() > 0 and _is_cut_out(signal, masked)
    )
    # A mask takes a voxel out at every echo; a threshold leaves more voxels partly zero.
    if is_masked and (signal[~masked] == 0).any(axis=1).sum() > masked.sum():
        return replace(_closed(_ZEROED), is_clipped=True)
    found = _from_voxels(signal[~masked], stack.echo_times_ms, n_channels)
    if not is_masked:
        return found
    return replace(found, is_partial=True, remark=found.remark if found.sigma else _ZEROED)


def _from_voxels(
    signal: NDArray[np.float32], echo_times_ms: Array, n_channels: int | None
) -> NoiseCandidate:
    if len(signal) < _ENOUGH_VOXELS:
        return _closed("too few voxels with any value")
    square = signal.astype(np.float64) ** 2
    level = square.mean(axis=1)
    quiet = (level <= _dark_threshold(level)) & ~_has_trend(signal)
    if quiet.sum() < _ENOUGH_VOXELS:
        return _closed("no background in view")
    air = _of_one_level(square[quiet])
    if len(air) < _ENOUGH_VOXELS:
        return _closed("no background with one common noise level")
    trend = _echo_scale_trend_per_s(air, echo_times_ms) if len(echo_times_ms) > 2 else 0.0
    air = _late_enough(air)
    moments = moments_of(air)
    n = n_channels or int(np.clip(np.rint(moments.channels), 1, MOST_CHANNELS))
    sigma = float(np.sqrt(moments.mean_square / (2.0 * n)))
    magnitudes = np.sqrt(air)
    # A constant is in every echo; what dark tissue leaves among the air is in the first.
    late = air[:, air.shape[1] // 2 :] if air.shape[1] >= _ECHOES_TO_HALVE else air
    constant = _added_constant(moments_of(late), np.sqrt(late))
    problem = _why_not(moments, magnitudes, constant)
    if np.percentile(square[:, 0], 99.0) - moments.mean_square < (_STANDS_OUT * sigma) ** 2:
        problem = problem or "nothing in view stands out from the background: it may be tissue"
    if problem:
        return replace(
            _closed(problem, len(air), trend),
            added_constant=constant,
            is_clipped=problem == _CLIPPED,
        )
    own = 0.5 * np.sqrt(moments.variance_of_square / air.size) / moments.mean_square
    return NoiseCandidate(
        method="air",
        sigma=sigma,
        n_channels=n,
        relative_sd=max(float(own), _LEAST_RELATIVE_SD),
        n_voxels=len(air),
        remark=f"background tested as {moments.channels:.2f} effective channels",
        echo_scale_trend_per_s=trend,
    )


def _voxels(stack: EchoStack, relative_sigma: NDArray[np.float32] | None) -> NDArray[np.float32]:
    """Rows of complete slices, thinned evenly where there are more than needed."""
    whole = stack.complete_slices
    seen = slice(None) if whole.all() else whole  # a view where it does
    signal = stack.magnitude[:, :, seen].reshape(-1, stack.n_echoes)
    step = max(1, len(signal) // _MOST_VOXELS)
    while np.gcd(step, stack.grid.shape[2]) > 1 and step > 1:
        step += 1  # slices alternate fastest: a common factor would leave some out
    signal = signal[::step]
    if relative_sigma is not None:
        scale = relative_sigma[:, :, seen].reshape(-1)[::step]
        signal = signal / scale[:, None]
    return signal[np.isfinite(signal).all(axis=1)]


def _is_cut_out(signal: NDArray[np.float32], masked: NDArray[np.bool_]) -> bool:
    """Whether voxels that are zero at every echo are more than quantised noise could make."""
    partly = signal[~masked]
    share = float((partly == 0).mean())
    return bool(masked.mean() > _NATURAL_ZEROS * max(share ** signal.shape[1], 1e-6))


def _dark_threshold(level: Array) -> float:
    """Mean square that parts dark voxels from bright ones (Otsu on the logarithm)."""
    return float(np.exp(threshold_otsu(np.log(level[level > 0]), nbins=128)))


def _has_trend(signal: NDArray[np.float32]) -> NDArray[np.bool_]:
    """Whether the signal falls or rises with echo number more than its own scatter explains."""
    n_echoes = signal.shape[1]
    if n_echoes < 4:
        return np.zeros(len(signal), dtype=bool)
    x = np.arange(n_echoes) - (n_echoes - 1) / 2.0
    m = signal.astype(np.float64)
    m = m - m.mean(axis=1, keepdims=True)
    slope = m @ x / (x @ x)
    rest = m - slope[:, None] * x
    se = np.sqrt((rest**2).sum(axis=1) / (n_echoes - 2) / (x @ x))
    limit = stdtrit(n_echoes - 2, 1.0 - _TREND_CHANCE)
    return np.asarray(np.abs(slope) > limit * np.maximum(se, 1e-30))


def _of_one_level(square: Array) -> Array:
    """Voxels whose mean square fits one noise level: the level that most of them fit.

    The mean of E squares of n channels is ``2n sigma²`` times a gamma variable of order nE over nE.
    One channel spreads most, so its bounds come first; then those of the channels that show.
    """
    level, n_echoes = square.mean(axis=1), square.shape[1]
    chosen = _within(level, n_echoes)
    if chosen.sum() < _ENOUGH_VOXELS:
        return square[chosen]
    channels = moments_of(square[chosen]).channels
    if channels > _SEVERAL_CHANNELS:
        chosen = _within(level, _NARROWED * min(channels, MOST_CHANNELS) * n_echoes)
    return square[chosen]


def _within(level: Array, order: float) -> NDArray[np.bool_]:
    low, high = (gammaincinv(order, p) / order for p in (_TAIL, 1.0 - _TAIL))
    ordered = np.sort(level)
    trials = np.geomspace(ordered[0] + 1e-30 * ordered[-1], ordered[-1], 400)
    count = np.searchsorted(ordered, trials * high) - np.searchsorted(ordered, trials * low)
    best = trials[int(np.argmax(count))]
    for _ in range(5):  # settle on the level that the chosen voxels themselves show
        inside = (level >= low * best) & (level <= high * best)
        if not inside.any():
            break
        best = float(level[inside].mean())
    return np.asarray((level >= low * best) & (level <= high * best))


def _echo_scale_trend_per_s(square: Array, echo_times_ms: Array) -> float:
    """How fast the noise amplitude grows with echo time, in 1/s: zero unless echoes are scaled.

    Zero too where so few voxels show such a trend by chance.
    """
    mean = square.mean(axis=0)
    t = echo_times_ms - echo_times_ms.mean()
    trend = t @ (0.5 * np.log(mean)) / (t @ t)
    se = np.sqrt((t**2 * (0.5 * square.std(axis=0) / mean) ** 2).sum() / len(square)) / (t @ t)
    return float(1e3 * trend) if abs(trend) > BY_CHANCE * se else 0.0


def _late_enough(square: Array) -> Array:
    """Leave out leading echoes in which tissue of very fast decay still shows above the noise.

    Voxels of an iron-loaded liver that are dark from the second echo on are noise there, and
    counted as such; their first echoes are not.
    """
    for first in range(max(square.shape[1] // 2, 1)):
        moments = moments_of(square[:, first:])
        if moments.echo_spread <= moments.echo_limit:
            return square[:, first:]
    return square


def _added_constant(moments: Moments, magnitudes: Array) -> float:
    """The constant that noise of one channel seems to stand on; 0 where it stands on none.

    A constant added to Rayleigh noise gives mean and variance of several channels, and takes
    their sigma from it too. Its skewness stays that of one channel, 0.63, where n channels have
    less: 0.41 for two, 0.20 for eight (central chi with 2n degrees).
    """
    k = 2.0 * moments.channels
    if moments.channels < _SEVERAL_CHANNELS or not moments.variance_of_square > 0:
        return 0.0
    mean = np.sqrt(2.0) * np.exp(gammaln((k + 1.0) / 2.0) - gammaln(k / 2.0))
    third = 2.0**1.5 * np.exp(gammaln((k + 3.0) / 2.0) - gammaln(k / 2.0))
    expected = (third - 3.0 * mean * k + 2.0 * mean**3) / (k - mean**2) ** 1.5
    centred = magnitudes - magnitudes.mean()
    sd = centred.std()
    skewness = (centred**3).mean() / sd**3
    # Tissue among the air skews it too, but not all the way to one channel.
    told = max(_SKEWER, 0.5 * (_RAYLEIGH_SKEWNESS - expected))
    told += BY_CHANCE * np.sqrt(6.0 / magnitudes.size)
    if skewness - expected <= told:
        return 0.0
    return float(magnitudes.mean() - _RAYLEIGH_MEAN_OVER_SD * sd)


def _why_not(moments: Moments, magnitudes: Array, constant: float) -> str:
    """What speaks against taking these voxels as noise; empty if nothing does."""
    zeros = float((magnitudes == 0).mean())
    step = _quantum(magnitudes)
    # Chance that a Rayleigh magnitude rounds to zero: 1 - exp(-step²/8 sigma²), mean² = 2 sigma².
    natural = 1.0 - np.exp(-(step**2) / (4.0 * moments.mean_square))
    if zeros > _NATURAL_ZEROS * natural + 0.002:
        return _CLIPPED
    if not moments.is_even or moments.unevenness > _UNEVEN:
        return "the background differs from place to place: it is not noise alone"
    if moments.echo_spread > moments.echo_limit:
        return "the background changes with echo time: it is not noise alone"
    if moments.channels < 0.8:
        return "the background is not distributed as the noise of any number of coils"
    if constant > 0.0:
        return "the background is noise on top of a constant"
    return ""


def _quantum(magnitudes: Array) -> float:
    """Smallest step between the values: what one stored unit is worth."""
    values = np.unique(magnitudes.ravel()[:200_000])
    return float(np.diff(values).min()) if len(values) > 1 else 0.0


def _closed(remark: str, n_voxels: int = 0, trend_per_s: float = 0.0) -> NoiseCandidate:
    return NoiseCandidate(
        method="air", sigma=None, n_channels=1, relative_sd=None, n_voxels=n_voxels, remark=remark,
        echo_scale_trend_per_s=trend_per_s,
    )  # fmt: skip
