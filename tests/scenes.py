"""Analytic scenes for the science rooms: arrays made with NumPy alone, truth known exactly.

Nothing here comes from the package's own equations: decays are ``S0 exp(-R2* TE)``, noise is
Gaussian on the real and imaginary part of each channel.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import Acquisition, EchoStack
from liverfe.grid import Grid
from liverfe.outlines import LabelMask, Region, organ_from_name

TIMES_MS = 1.0 + 1.2 * np.arange(12)
SIZE = 72
S0 = 100.0
BODY_R2STAR_PER_S = 40.0

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, kw_only=True)
class Scene:
    """A body in air with one organ: images, and the organ's voxels."""

    stack: EchoStack
    organ: Mask
    body: Mask

    def region(self, name: str = "liver", mask: Mask | None = None) -> Region:
        """The organ, or another mask, as a region drawn on the images' own grid."""
        label = LabelMask(mask=self.organ if mask is None else mask, grid=self.stack.grid)
        return Region(name=name, organ=organ_from_name(name), shape=label)

    def with_magnitude(self, magnitude: Array, times_ms: Array | None = None) -> Scene:
        """The same scene with other images."""
        stack = EchoStack(
            magnitude=magnitude,
            echo_times_ms=self.stack.echo_times_ms if times_ms is None else times_ms,
            grid=self.stack.grid,
            acquisition=self.stack.acquisition,
        )
        return Scene(stack=stack, organ=self.organ, body=self.body)


def make_scene(
    r2star_per_s: float | Array,
    *,
    snr: float = 100.0,
    times_ms: Array = TIMES_MS,
    n_channels: int = 1,
    seed: int = 7,
    field_strength_t: float | None = 1.5,
    organ_s0: float = S0,
) -> Scene:
    """Make a scene whose organ lies on the patient's right (+x) and decays at a known rate.

    Parameters
    ----------
    r2star_per_s : float or ndarray
        R2* of the organ, one for all or one for each of its `organ_voxels` voxels.
    snr : float
        Body S0 over sigma; 0 sigma for infinity.
    """
    rng = np.random.default_rng(seed)
    grid = Grid(shape=(SIZE, SIZE, 2), affine_mm=np.diag([2.0, 2.0, 8.0, 1.0]))
    x = np.linspace(-1.0, 1.0, SIZE)
    disc = x[:, None] ** 2 + x[None, :] ** 2 < 0.7
    body = np.repeat(disc[..., None], 2, axis=2)
    organ = organ_mask()
    rate = np.where(body, BODY_R2STAR_PER_S, 0.0)
    rate[organ] = r2star_per_s
    s0 = np.where(body, S0, 0.0)
    s0[organ] = organ_s0
    clean = s0[..., None] * np.exp(-rate[..., None] * times_ms * 1e-3)
    sigma = S0 / snr
    power = np.zeros_like(clean)
    for channel in range(n_channels):
        signal = clean if channel == 0 else 0.0
        power += (signal + sigma * rng.standard_normal(clean.shape)) ** 2
        power += (sigma * rng.standard_normal(clean.shape)) ** 2
    stack = EchoStack(
        magnitude=np.sqrt(power).astype(np.float32),
        echo_times_ms=times_ms,
        grid=grid,
        acquisition=Acquisition(field_strength_t=field_strength_t, imaging_frequency_mhz=63.87)
        if field_strength_t == 1.5
        else Acquisition(field_strength_t=field_strength_t),
    )
    return Scene(stack=stack, organ=organ, body=body)


def organ_mask() -> Mask:
    """The organ's 2 x 320 voxels."""
    organ = np.zeros((SIZE, SIZE, 2), dtype=bool)
    organ[SIZE // 2 + 6 : SIZE // 2 + 22, SIZE // 2 - 10 : SIZE // 2 + 10] = True
    return organ


ORGAN_VOXELS = int(organ_mask().sum())
