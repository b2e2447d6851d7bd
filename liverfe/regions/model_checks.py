"""Does the region's signal behave like one decay? Each doubt with the size of its effect."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import fit_rows, r2star_bound_per_s
from liverfe.noise import NoiseLevel

Mask = NDArray[np.bool_]

_RISE = 1.02
"""A last echo this much above the first is no decay; noise of a region's mean is far below."""
_SATURATED_SHARE = 0.02
"""Share of voxels on a plateau that cannot be chance."""
_CHI2 = 1.5
"""Median reduced chi-square from which the misfit is told; 10 degrees of freedom exceed it by
chance in one voxel of eight, a median of dozens never."""
_ECHO_SHIFT = 0.05
"""An echo whose absence moves R2* by more than this share is told."""
_ECHO_SHIFT_SE = 4.0
"""... if the move is also this many times what noise explains."""
_FEWEST_ECHOES = 5
"""With fewer, leaving one out says more about the others' spacing than about itself."""


def refuse_no_decay(name: str, mask: Mask, stack: EchoStack) -> None:
    """Refuse a region whose signal rises with echo time or is cut off at a plateau.

    Raises
    ------
    StudyRefused
        ``signal-rises``, ``saturated``.
    """
    signal = stack.magnitude[mask]
    mean = signal.mean(axis=0, dtype=np.float64)
    if mean[-1] > _RISE * mean[0]:
        raise StudyRefused(
            Finding.of(
                "signal-rises", region=name, first=f"{mean[0]:.4g}", last=f"{mean[-1]:.4g}",
                first_te=f"{stack.echo_times_ms[0]:g}", last_te=f"{stack.echo_times_ms[-1]:g}",
            )
        )  # fmt: skip
    top = float(signal.max())
    plateau = float(((signal >= top).sum(axis=1) >= 2).mean())
    if plateau > _SATURATED_SHARE:
        raise StudyRefused(
            Finding.of(
                "saturated", region=name, share=f"{100 * plateau:.0f}", value=f"{top:.5g}"
            )
        )


def misfit_findings(
    name: str,
    used: Mask,
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
    used : ndarray of bool, shape (X, Y, Z)
        Its measured voxels after trimming.
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
    if stack.n_echoes >= _FEWEST_ECHOES and used.any():
        mean = stack.magnitude[used].mean(axis=0, dtype=np.float64)
        se = float(
            r2star_bound_per_s(
                stack.echo_times_ms, r2star_per_s, s0, noise.sigma, n=noise.n_channels
            )
        ) / np.sqrt(used.sum())
        worst, shift = _worst_echo(mean, stack, noise)
        if abs(shift) > max(_ECHO_SHIFT * r2star_per_s, _ECHO_SHIFT_SE * se):
            findings.append(
                Finding.of(
                    "echo-disagrees", region=name, te=f"{stack.echo_times_ms[worst]:g}",
                    shift=f"{100 * shift / r2star_per_s:+.0f}",
                )
            )  # fmt: skip
    return tuple(findings)


def _worst_echo(
    mean: NDArray[np.float64], stack: EchoStack, noise: NoiseLevel
) -> tuple[int, float]:
    """The echo whose absence moves R2* of the mean curve most, and by how much (1/s)."""
    sigma = np.array([noise.sigma])

    def rate(kept: NDArray[np.bool_]) -> float:
        curve = mean[kept].astype(np.float32)[None]
        return float(
            fit_rows(curve, stack.echo_times_ms[kept], sigma, noise.n_channels).r2star_per_s[0]
        )

    everything = np.ones(stack.n_echoes, dtype=bool)
    whole = rate(everything)
    shifts = []
    for e in range(stack.n_echoes):
        kept = everything.copy()
        kept[e] = False
        shifts.append(rate(kept) - whole)
    finite = np.nan_to_num(np.array(shifts))
    worst = int(np.argmax(np.abs(finite)))
    return worst, float(finite[worst])
