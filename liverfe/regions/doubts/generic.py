"""Misfits without a cause: scatter beyond noise, in one echo or in all."""

from __future__ import annotations

import dataclasses

import numpy as np

from liverfe.regions.doubts.misfit import Misfit, misfit
from liverfe.regions.doubts.sample import Sample

_SE = 4.0
"""Standard errors that are no chance."""
_FAR = 1.4
"""A mean reduced chi-square from which the noise is so far off, or the voxels are so unlike one
decay, that limits and intervals are wrong whatever R2* does."""
_NOISY = 1.8
"""One echo scatters by this many times the variance of the others."""
_TELLS = 0.3
"""An echo's scatter is its own if this share of its variance is not taken by the fit."""


def too_scattered(sample: Sample, found: Misfit, *, far: bool = False) -> bool:
    """Whether the voxels scatter more than noise and the error of sigma explain."""
    degrees = found.share.sum() / sample.inflation
    allowed = float(np.hypot(_SE * np.sqrt(2.0 / degrees), _SE * 2.0 * sample.sigma_sd))
    return found.scatter > max(1.0 + allowed, _FAR if far else 0.0)


def noisy_echo(sample: Sample, found: Misfit) -> int | None:
    """Find an echo that scatters far more than the others do, as a ghost makes it."""
    share = found.share.mean(axis=0)
    ratio = (found.z**2).mean(axis=0) / np.maximum(share, 1e-6)
    usual = float(np.median(ratio))
    se = np.sqrt(2.0 * sample.inflation / len(found.z))
    excess = np.where(share > _TELLS, ratio / usual, 0.0)
    echo = int(np.argmax(excess))
    return echo if excess[echo] >= max(_NOISY, 1.0 + _SE * 2.0 * se) else None


def rate_without_the_worst_echo(sample: Sample, found: Misfit) -> tuple[int, float]:
    """Leave out each echo in turn: which moves the median R2* most, and where to (1/s)."""
    stated = found.median_rate_per_s
    rates = [rate_without(sample, e) for e in range(len(sample.echo_times_ms))]
    # Without its first echo a fast decay may be beyond reach: that is no disagreement.
    known = np.array([rate if np.isfinite(rate) else stated for rate in rates])
    echo = int(np.argmax(np.abs(known - stated)))
    return echo, float(known[echo])


def rate_with_stronger_noise(sample: Sample, found: Misfit) -> float:
    """Median R2* (1/s) if all scatter were noise."""
    louder = misfit(sample, sample.m / np.sqrt(max(found.scatter, 1e-3)))
    return louder.median_rate_per_s if len(louder.z) else found.median_rate_per_s


def rate_without(sample: Sample, echo: int) -> float:
    """Median R2* (1/s) of the other echoes; NaN where they show no decay."""
    kept = np.arange(len(sample.echo_times_ms)) != echo
    fewer = dataclasses.replace(
        sample, m=sample.m[:, kept], echo_times_ms=sample.echo_times_ms[kept]
    )
    left = misfit(fewer)
    return left.median_rate_per_s if len(left.z) else np.nan
