"""Does the region's signal behave like one decay? Each doubt with the size of its effect."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import fit_rows, noise_floor, r2star_bound_per_s
from liverfe.noise import NoiseLevel

Mask = NDArray[np.bool_]

_RISE = 1.02
"""A last echo this much above the first is no decay; noise of a region's mean is far below."""
_SIGNAL_OVER_FLOOR = 1.25
"""Only a mean this far above the noise floor is signal; below, it rises and falls by chance."""
_RISE_BETWEEN = 0.10
"""An echo this share of the first above an earlier one is told: fat in phase, or a wrong order."""
_SATURATED_SHARE = 0.02
"""Share of voxels on a plateau that cannot be chance."""
_CHI2 = 1.3
"""Median reduced chi-square from which the misfit is told. It is 0.93 with ten degrees of freedom
and known by a region to a few percent; a sigma 10 % too low makes it 1.13."""
_ECHO_SHIFT = 0.05
"""An echo whose absence moves R2* by more than this share is told."""
_ECHO_SHIFT_SE = 4.0
"""... if the move is also this many times what noise explains."""
_SKEW_SHARE = 0.35
"""A median near the limit shifts by up to this share of one voxel's standard error, because the
scatter of fast decays is skewed (largest share in simulations of clean regions: 0.3)."""
_MOST_VOXELS = 1500
"""Voxels that take part in leaving out echoes: enough for a median to a percent."""
_FEWEST_ECHOES = 5
"""With fewer, leaving one out says more about the others' spacing than about itself."""


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
    if mean[-1] > max(_RISE * mean[0], floor):
        raise StudyRefused(
            Finding.of(
                "signal-rises", region=name, first=f"{mean[0]:.4g}", last=f"{mean[-1]:.4g}",
                first_te=f"{stack.echo_times_ms[0]:g}", last_te=f"{stack.echo_times_ms[-1]:g}",
            )
        )  # fmt: skip
    low_so_far = np.minimum.accumulate(mean)
    later = int(np.argmax(mean - low_so_far))
    rise = float(mean[later] - low_so_far[later]) / float(mean[0])
    if rise > _RISE_BETWEEN and mean[later] > floor:
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
    plateau = float(((signal >= top).sum(axis=1) >= 2).mean())
    if plateau > _SATURATED_SHARE:
        raise StudyRefused(
            Finding.of("saturated", region=name, share=f"{100 * plateau:.0f}", value=f"{top:.5g}")
        )
    return ()


def misfit_findings(
    name: str,
    voxels: Mask,
    stack: EchoStack,
    noise: NoiseLevel,
    *,
    r2star_per_s: float,
    s0: float,
    median_chi2: float | None,
) -> tuple[Finding, ...]:
    """Doubts about the model, from the misfit and from leaving each echo out in turn.

    Parameters
    ----------
    name : str
        The region's name.
    voxels : ndarray of bool, shape (X, Y, Z)
        Its voxels that were not trimmed, those over the limit among them.
    stack, noise
        Images and noise.
    r2star_per_s, s0 : float
        The region's median R2* and S0.
    median_chi2 : float or None
        Median reduced chi-square of the used voxels.

    Returns
    -------
    tuple of Finding
        ``two-echoes``, ``poor-fit``, ``echo-disagrees``.
    """
    if stack.n_echoes == 2:
        return (Finding.of("two-echoes"),)
    findings = []
    if median_chi2 is not None and median_chi2 > _CHI2:
        findings.append(Finding.of("poor-fit", region=name, chi2=f"{median_chi2:.1f}"))
    if stack.n_echoes >= _FEWEST_ECHOES and r2star_per_s > 0 and voxels.any():
        signal = stack.magnitude[voxels]
        signal = signal[:: max(1, len(signal) // _MOST_VOXELS)]
        worst, shift, explained = _worst_echo(signal, stack, noise, r2star_per_s, s0)
        if abs(shift) > max(_ECHO_SHIFT * r2star_per_s, explained):
            findings.append(
                Finding.of(
                    "echo-disagrees", region=name, te=f"{stack.echo_times_ms[worst]:g}",
                    shift=f"{100 * shift / r2star_per_s:+.0f}",
                )
            )  # fmt: skip
    return tuple(findings)


def _worst_echo(
    signal: NDArray[np.float32], stack: EchoStack, noise: NoiseLevel, r2star_per_s: float, s0: float
) -> tuple[int, float, float]:
    """The echo whose absence moves the median R2* of the voxels most beyond what noise explains.

    Voxel by voxel, not on the mean signal: iron that differs between voxels bends the mean curve
    although each voxel decays with one exponential. Returns its number, the shift and the shift
    that noise could explain, both in 1/s.
    """
    sigma = np.array([noise.sigma])

    def median_rate(kept: NDArray[np.bool_]) -> float:
        rows = fit_rows(
            np.ascontiguousarray(signal[:, kept]), stack.echo_times_ms[kept], sigma,
            noise.n_channels,
        )  # fmt: skip
        rate = np.where(np.isfinite(rows.r2star_per_s), rows.r2star_per_s, np.inf)
        return float(np.median(rate))

    everything = np.ones(stack.n_echoes, dtype=bool)
    whole = median_rate(everything)
    shifts, explained = np.zeros(stack.n_echoes), np.ones(stack.n_echoes)
    for e in range(stack.n_echoes):
        kept = everything.copy()
        kept[e] = False
        without = median_rate(kept)
        se = float(
            r2star_bound_per_s(
                stack.echo_times_ms[kept], r2star_per_s, s0, noise.sigma, n=noise.n_channels
            )
        )
        # Without its first echo a fast decay may be beyond reach: that is no disagreement.
        shifts[e] = without - whole if np.isfinite(without) else 0.0
        explained[e] = max(_ECHO_SHIFT_SE / len(signal) ** 0.5, _SKEW_SHARE) * se
    worst = int(np.argmax(np.abs(shifts) / np.maximum(explained, 1e-9)))
    return worst, float(shifts[worst]), float(explained[worst])
