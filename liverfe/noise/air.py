"""Sigma from background air: voxels in which every echo is nothing but noise.

In air all echoes of a voxel are draws from one and the same distribution, so the E echoes act as E
repeats. Voxels are taken as air if their signal does not fall with echo time and their mean square
fits one common noise level; the whole lot is believed only if it then behaves as noise of coils
does (the same in every voxel and at every echo).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaincinv, gammaln, stdtrit
from skimage.filters import threshold_otsu

from liverfe.echoes import EchoStack
from liverfe.noise.level import NoiseCandidate

_ENOUGH_VOXELS = 400
"""Below this many air voxels the number of channels cannot be told."""
_MOST_VOXELS = 200_000
"""More voxels add nothing: sigma is then known to 0.1 %."""
_TREND_CHANCE = 0.01
"""A voxel whose signal falls with echo time more than noise does by this chance is no air; those
that rise as much go too, or the rest would rise."""
_TAIL = 0.005
"""Share of true noise voxels that the selection by mean square may lose at each end."""
_SAME_IN_VOXELS = (0.6, 1.5)
"""Variance between voxels over what the variance within them predicts: 1 for pure noise."""
_NEIGHBOURS = 64
"""Voxels in a row whose mean is compared with the others': what no single voxel shows, they do."""
_UNEVEN = 0.15
"""Sigma² may differ over the image by this share (SD): a ghost over half of the air that does so
makes sigma 8 % too high."""
_SAME_IN_ECHOES = 1.10
"""Largest over smallest mean square of the echoes: 1 for pure noise."""
_BY_CHANCE = 4.0
"""Both may be exceeded by this many standard errors."""
_STANDS_OUT = 10.0
"""Amplitude of the brightest percent in sigma. Where nothing is so bright, what is darkest may be
tissue, whose few echoes at low signal look like the noise of many channels."""
_NATURAL_ZEROS = 4.0
"""Exact zeros up to this many times what quantisation explains are noise, more are a mask."""
_LEAST_RELATIVE_SD = 0.005
"""Sigma is never known better than this: air differs over the image."""
_MOST_CHANNELS = 64
_SEVERAL_CHANNELS = 1.2
"""Below this many effective channels there is no constant to speak of."""
_SKEWER = 0.12
"""A skewness this much above that of the channels says that there is a constant instead; channels
whose noise is correlated differ by less."""
_RAYLEIGH_MEAN_OVER_SD = 1.913
"""Mean over SD of the noise of one channel, sqrt(pi / (4 - pi)) (Koay 2006)."""
_CLIPPED = "part of the background was set to zero"

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class _Moments:
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
        return self.mean_square**2 / variance if variance > 0 else float(_MOST_CHANNELS)

    @property
    def between_limit(self) -> float:
        """Largest believable `between_over_within`, with its standard error for chi-squares."""
        kurtosis = 2.0 * 6.0 / self.channels / self.n_echoes
        se = np.sqrt((2.0 + 2.0 / (self.n_echoes - 1) + kurtosis) / self.n_voxels)
        return float(_SAME_IN_VOXELS[1] + _BY_CHANCE * se)

    @property
    def echo_limit(self) -> float:
        """Largest believable `echo_spread`: a mean of N chi-squares varies by 1 / sqrt(n N)."""
        return float(_SAME_IN_ECHOES + _BY_CHANCE / np.sqrt(self.channels * self.n_voxels))


def sigma_from_air(stack: EchoStack, *, n_channels: int | None = None) -> NoiseCandidate:
    """Estimate sigma and the number of channels from background air.

    Parameters
    ----------
    stack : EchoStack
        Magnitudes in true values.
    n_channels : int or None
        Effective number of channels if known; None: from the background itself,
        ``n = mean(M²)² / var(M²)`` to the nearest whole number.

    Returns
    -------
    NoiseCandidate
        ``sigma² = mean(M²) / 2n`` (Constantinides 1997), or sigma None and a remark that says why
        there is no usable air.
    """
    signal = _voxels(stack)
    masked = (signal == 0).all(axis=1)
    if masked.mean() > 0.02 and (~masked).sum() > 0 and _is_cut_out(signal, masked):
        # A mask takes a voxel out at every echo; a threshold leaves more voxels partly zero.
        partly = (signal[~masked] == 0).any(axis=1).sum() > masked.sum()
        return replace(_closed("the scanner set the background to zero"), is_clipped=bool(partly))
    signal = signal[~masked]
    if len(signal) < _ENOUGH_VOXELS:
        return _closed("too few voxels with any value")
    square = signal.astype(np.float64) ** 2
    level = square.mean(axis=1)
    quiet = (level <= _dark_threshold(level)) & ~_has_trend(signal)
    if quiet.sum() < _ENOUGH_VOXELS:
        return _closed("no background in view")
    chosen = _of_one_level(level[quiet], signal.shape[1])
    if chosen.sum() < _ENOUGH_VOXELS:
        return _closed("no background with one common noise level")
    air = square[quiet][chosen]
    trend = _echo_scale_trend_per_s(air, stack.echo_times_ms) if stack.n_echoes > 2 else 0.0
    air = _late_enough(air)
    moments = _moments(air)
    n = n_channels or int(np.clip(np.rint(moments.channels), 1, _MOST_CHANNELS))
    sigma = float(np.sqrt(moments.mean_square / (2.0 * n)))
    magnitudes = np.sqrt(air)
    constant = _added_constant(moments, magnitudes)
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


def _voxels(stack: EchoStack) -> NDArray[np.float32]:
    """Rows of complete slices, thinned evenly where there are more than needed."""
    signal = stack.magnitude[:, :, stack.complete_slices].reshape(-1, stack.n_echoes)
    step = max(1, len(signal) // _MOST_VOXELS)
    while np.gcd(step, stack.grid.shape[2]) > 1 and step > 1:
        step += 1  # slices alternate fastest: a common factor would leave some out
    signal = signal[::step]
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


def _of_one_level(level: Array, n_echoes: int) -> NDArray[np.bool_]:
    """Voxels whose mean square fits one noise level: the level that most of them fit.

    For one channel the mean of E squares is ``2 sigma²`` times a gamma variable of order E over E;
    more channels spread less and stay inside the same bounds.
    """
    low, high = (gammaincinv(n_echoes, p) / n_echoes for p in (_TAIL, 1.0 - _TAIL))
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
    return float(1e3 * trend) if abs(trend) > _BY_CHANCE * se else 0.0


def _late_enough(square: Array) -> Array:
    """Leave out leading echoes in which tissue of very fast decay still shows above the noise.

    Voxels of an iron-loaded liver that are dark from the second echo on are noise there, and
    counted as such; their first echoes are not.
    """
    for first in range(max(square.shape[1] // 2, 1)):
        moments = _moments(square[:, first:])
        if moments.echo_spread <= moments.echo_limit:
            return square[:, first:]
    return square


def _moments(square: Array) -> _Moments:
    n_voxels, n_echoes = square.shape
    within = square.var(axis=1, ddof=1).mean()
    between = square.mean(axis=1).var(ddof=1) * n_echoes
    per_echo = square.mean(axis=0)
    return _Moments(
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
    by_chance = variance / _NEIGHBOURS * (1.0 + _BY_CHANCE * np.sqrt(2.0 / n_rows))
    return float(np.sqrt(max(rows.var(ddof=1) - by_chance, 0.0)) / level.mean())


def _added_constant(moments: _Moments, magnitudes: Array) -> float:
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
    told = _SKEWER + _BY_CHANCE * np.sqrt(6.0 / magnitudes.size)
    if skewness - expected <= told:
        return 0.0
    return float(magnitudes.mean() - _RAYLEIGH_MEAN_OVER_SD * sd)


def _why_not(moments: _Moments, magnitudes: Array, constant: float) -> str:
    """What speaks against taking these voxels as noise; empty if nothing does."""
    zeros = float((magnitudes == 0).mean())
    step = _quantum(magnitudes)
    # Chance that a Rayleigh magnitude rounds to zero: 1 - exp(-step²/8 sigma²), mean² = 2 sigma².
    natural = 1.0 - np.exp(-(step**2) / (4.0 * moments.mean_square))
    if zeros > _NATURAL_ZEROS * natural + 0.002:
        return _CLIPPED
    same = _SAME_IN_VOXELS[0] <= moments.between_over_within <= moments.between_limit
    if not same or moments.unevenness > _UNEVEN:
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
