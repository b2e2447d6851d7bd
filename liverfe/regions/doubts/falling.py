"""Does the signal fall at all? Refusals that need no fit."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import noise_floor
from liverfe.noise import NoiseLevel

Mask = NDArray[np.bool_]

_RISE = 1.02
"""A last echo this much above the first is no decay; noise of a region's mean is far below."""
_SIGNAL_OVER_FLOOR = 1.25
"""Only a mean this far above the noise floor is signal; below, it rises and falls by chance."""
_RISE_BETWEEN = 0.10
"""An echo this share of the first above an earlier one is told: fat in phase, or a wrong order."""
_SURE, _SHARED = 5.0, 4.0
"""A rise is one from so many standard errors on; up to so many voxels share their noise where
images are interpolated."""
_SATURATED_SHARE = 0.02
"""Share of voxels with a plateau over two echoes that cannot be chance."""
_PILED_SHARE = 0.10
"""... at one echo alone, from where on the median of the region moves with them."""
_PILE = 3.0
"""A pile-up holds this many times the voxels of the three values below it together."""
_VALUES_BELOW = 3


def check_decay(name: str, mask: Mask, stack: EchoStack, noise: NoiseLevel) -> tuple[Finding, ...]:
    """Refuse a region whose signal rises with echo time or is cut off at a plateau.

    Parameters
    ----------
    name : str
        The region's name.
    mask : ndarray of bool, shape (X, Y, Z)
        Its voxels.
    stack, noise
        Images and noise.

    Returns
    -------
    tuple of Finding
        ``signal-not-falling`` where the signal rises on its way.

    Raises
    ------
    StudyRefused
        ``signal-rises``, ``saturated``.
    """
    signal = stack.magnitude[mask]
    mean = signal.mean(axis=0, dtype=np.float64)
    floor = _SIGNAL_OVER_FLOOR * noise_floor(noise.n_channels) * noise.sigma
    # Means of few voxels rise by chance; neighbours share their noise.
    chance = _SURE * noise.sigma * float(np.sqrt(2.0 * _SHARED / len(signal)))
    if mean[-1] > max(_RISE * mean[0], mean[0] + chance, floor):
        raise StudyRefused(
            Finding.of(
                "signal-rises", region=name, first=f"{mean[0]:.4g}", last=f"{mean[-1]:.4g}",
                first_te=f"{stack.echo_times_ms[0]:g}", last_te=f"{stack.echo_times_ms[-1]:g}",
            )
        )  # fmt: skip
    low_so_far = np.minimum.accumulate(mean)
    later = int(np.argmax(mean - low_so_far))
    rise = float(mean[later] - low_so_far[later]) / float(mean[0])
    if rise > _RISE_BETWEEN and rise * mean[0] > chance and mean[later] > floor:
        earlier = int(np.argmin(mean[: later + 1]))
        facts = {
            "region": name,
            "share": f"{100 * rise:.0f}",
            "earlier": f"{stack.echo_times_ms[earlier]:g}",
            "later": f"{stack.echo_times_ms[later]:g}",
        }
        return (Finding.of("signal-not-falling", **facts),)
    return _refuse_plateau(name, signal)


def _refuse_plateau(name: str, signal: NDArray[np.float32]) -> tuple[Finding, ...]:
    top = float(signal.max())
    at_top = (signal >= top).sum(axis=1)
    share = float((at_top >= 2).mean())
    limit = _SATURATED_SHARE
    if share <= limit and _is_pile(signal, top):
        # Cut off at one echo alone, the plateau runs over voxels and not over echoes.
        share, limit = float((at_top >= 1).mean()), _PILED_SHARE
    if share > limit:
        raise StudyRefused(
            Finding.of("saturated", region=name, share=f"{100 * share:.0f}", value=f"{top:.5g}")
        )
    return ()


def _is_pile(signal: NDArray[np.float32], top: float) -> bool:
    """Whether far more voxels share the highest value than hold the values next below it."""
    at_top = (signal >= top).sum(axis=0)
    echo = int(np.argmax(at_top))
    if at_top[echo] <= _PILED_SHARE * len(signal):
        return False
    below = np.unique(signal[signal[:, echo] < top, echo], return_counts=True)[1]
    return bool(at_top[echo] > _PILE * max(int(below[-_VALUES_BELOW:].sum()), 1))
