"""Regions with one fault each, made with NumPy alone: decay times a factor, then noise.

The factor acts on the true amplitude of every voxel, noise comes after it: as a scanner does it.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import Acquisition, EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import fit_r2star
from liverfe.grid import Grid
from liverfe.noise import NoiseLevel
from liverfe.regions import RegionRules, RegionSummary, summarise_region

Array = NDArray[np.float64]

ECHO_SETS_MS = {
    "12 x 0.8": 1.0 + 0.8 * np.arange(12),
    "12 x 1.13": 0.99 + 1.13 * np.arange(12),
    "8 x 1.2": 1.2 + 1.2 * np.arange(8),
    "8 x 2.2": 1.3 + 2.2 * np.arange(8),
    "12 x 0.7": 0.8 + 0.7 * np.arange(12),
}
"""The five echo sets of the methods sheet (4.2)."""
TIMES_MS: Array = 1.0 + 1.2 * np.arange(12)

FAT_PPM = np.array([0.90, 1.30, 2.10, 2.75, 4.20, 5.30])
FAT_SHARE = np.array([0.088, 0.700, 0.120, 0.006, 0.039, 0.047])
"""Six peaks of liver fat (methods sheet 3.1, Hamilton 2011; secondary), water at 4.70 ppm."""


@dataclass(frozen=True, kw_only=True)
class Scan:
    """A square of one tissue: its summary, what was refused, and the true median R2*."""

    summary: RegionSummary | None
    findings: tuple[Finding, ...]
    true_per_s: float

    @property
    def codes(self) -> set[str]:
        """Codes of all findings."""
        return {finding.code for finding in self.findings}

    @property
    def stated_shift(self) -> float:
        """True R2* over the stated one, less one."""
        assert self.summary is not None
        return self.true_per_s / self.summary.r2star.value - 1.0


def phasor(times_ms: Array, field_t: float = 1.5) -> NDArray[np.complex128]:
    """Fat over fat at time zero, turning against water."""
    hertz = (FAT_PPM - 4.70) * 42.577478518 * field_t
    turns = np.exp(2j * np.pi * hertz[:, None] * times_ms * 1e-3)
    return np.asarray((FAT_SHARE / FAT_SHARE.sum()) @ turns)


def scan(
    r2star_per_s: float,
    *,
    times_ms: Array = TIMES_MS,
    true_times_ms: Array | None = None,
    factor: Array | float = 1.0,
    added: float = 0.0,
    snr: float = 60.0,
    n: int = 1,
    cv: float = 0.1,
    side: int = 22,
    sigma_off: float = 1.0,
    seed: int = 1,
    field_t: float | None = 1.5,
    quantum: float = 0.0,
    top: float = np.inf,
) -> Scan:
    """Scan a square of tissue and summarise it.

    `factor` multiplies the amplitude (by echo, or by voxel and echo), `added` is a constant in the
    images, `true_times_ms` are when the images were really taken; `sigma_off` is sigma as believed
    over sigma, `quantum` the size of a stored count, `top` the highest value stored; sigma is 1.
    """
    rng = np.random.default_rng(seed)
    shape = (side, side, 2)
    rate = (
        rng.gamma(1.0 / cv**2, r2star_per_s * cv**2, shape) if cv else np.full(shape, r2star_per_s)
    )
    taken = times_ms if true_times_ms is None else true_times_ms
    clean = snr * np.exp(-rate[..., None] * taken * 1e-3) * factor
    power = (clean + rng.standard_normal(clean.shape)) ** 2 + rng.standard_normal(clean.shape) ** 2
    if n > 1:
        power += rng.chisquare(2 * (n - 1), clean.shape)
    magnitude = np.minimum(np.sqrt(power) + added, top)
    if quantum:
        magnitude = np.round(magnitude / quantum) * quantum
    stack = EchoStack(
        magnitude=magnitude.astype(np.float32),
        echo_times_ms=times_ms,
        grid=Grid(shape=shape, affine_mm=np.diag([2.0, 2.0, 8.0, 1.0])),
        acquisition=Acquisition(field_strength_t=field_t),
    )
    noise = NoiseLevel(sigma=sigma_off, n_channels=n, method="air", relative_sd=0.02)
    fit = fit_r2star(stack, noise)
    mask = np.ones(shape, dtype=bool)
    try:
        summary = summarise_region("liver", "liver", mask, stack, noise, fit, RegionRules())
    except StudyRefused as refusal:
        return Scan(summary=None, findings=refusal.findings, true_per_s=float(np.median(rate)))
    return Scan(summary=summary, findings=summary.findings, true_per_s=float(np.median(rate)))
