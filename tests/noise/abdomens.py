"""Synthetic abdomens in air with known noise, made with NumPy alone."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.grid import Grid

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

TWELVE_MS = 1.0 + 1.2 * np.arange(12)
SHAPE = (72, 60, 4)

# Six peaks of liver fat (methods sheet 3.1, H6): shift from water in ppm, relative amplitude.
_FAT_PPM = np.array([0.90, 1.30, 2.10, 2.75, 4.20, 5.30]) - 4.70
_FAT_SHARE = np.array([0.088, 0.700, 0.120, 0.006, 0.039, 0.047])
_HZ_PER_PPM_AT_1P5_T = 1.5 * 42.577478518


@dataclass(frozen=True, kw_only=True)
class Abdomen:
    """Amplitudes without noise, and which voxels are body."""

    amplitude: Array
    times_ms: Array
    body: Mask

    def magnitude(self, sigma: Array | float, *, n: int = 1, seed: int = 0) -> NDArray[np.float64]:
        """Root of the sum of squares of n channels with noise of SD sigma on real and imaginary."""
        rng = np.random.default_rng(seed)
        shape = self.amplitude.shape
        power = (self.amplitude + sigma * rng.standard_normal(shape)) ** 2
        power += np.asarray(sigma) ** 2 * rng.chisquare(2 * n - 1, shape)
        return np.sqrt(power)

    def stack(self, magnitude: Array) -> EchoStack:
        return stack_of(magnitude, self.times_ms)


def liver_mask(shape: tuple[int, int, int] = SHAPE) -> Mask:
    """The disc of liver of an `abdomen` of this shape."""
    x = np.linspace(-1, 1, shape[0])[:, None]
    y = np.linspace(-1, 1, shape[1])[None, :]
    disc = (x - 0.3) ** 2 + y**2 < 0.1225
    return np.repeat(disc[..., None], shape[2], axis=2)


def zero_filled(
    amplitude: Array, sigma: float, factor: float, *, n: int = 1, seed: int = 0
) -> Array:
    """Magnitude of images whose Fourier transform is padded to `factor` times their size."""
    rng = np.random.default_rng(seed)
    size = amplitude.shape[:2]
    large = [2 * round(factor * s / 2) for s in size]
    pad = [((b - s) // 2, b - s - (b - s) // 2) for b, s in zip(large, size, strict=True)]
    power = np.zeros((*large, *amplitude.shape[2:]))
    for channel in range(n):
        noise = rng.standard_normal((2, *amplitude.shape))
        image = (amplitude if channel == 0 else 0.0) + sigma * (noise[0] + 1j * noise[1])
        spectrum = np.fft.fftshift(np.fft.fft2(image, axes=(0, 1)), axes=(0, 1))
        padded = np.fft.ifftshift(np.pad(spectrum, [*pad, (0, 0), (0, 0)]), axes=(0, 1))
        fine = np.fft.ifft2(padded, axes=(0, 1)) * np.prod(large) / np.prod(size)
        power += np.abs(fine) ** 2
    return np.sqrt(power)


def stack_of(magnitude: Array, times_ms: Array) -> EchoStack:
    grid = Grid(shape=magnitude.shape[:3], affine_mm=np.diag([3.0, 3.0, 8.0, 1.0]))
    return EchoStack(magnitude=magnitude, echo_times_ms=np.asarray(times_ms, float), grid=grid)


def abdomen(
    *,
    s0: float = 400.0,
    body_per_s: float = 35.0,
    liver_per_s: float = 120.0,
    times_ms: Array = TWELVE_MS,
    in_air: bool = True,
    fast_share: float = 0.0,
    liver_fat: float = 0.0,
    fat_layer: bool = False,
    shape: tuple[int, int, int] = SHAPE,
) -> Abdomen:
    """An ellipse of tissue with a disc of liver; S0 undulates by 20 % as coils make it.

    `fast_share` of each voxel decays four times as fast; `liver_fat` is the liver's fat fraction;
    `fat_layer` makes the rim of the body fat, twice as bright.
    """
    x = np.linspace(-1, 1, shape[0])[:, None, None]
    y = np.linspace(-1, 1, shape[1])[None, :, None]
    z = np.zeros((1, 1, shape[2]))
    body = (x**2 + (y / 0.8) ** 2 + z < 0.64) | (not in_air)
    liver = liver_mask(shape) & body
    rate = np.where(liver, liver_per_s, body_per_s)[..., None]
    t = np.asarray(times_ms, float) * 1e-3
    curve = (1 - fast_share) * np.exp(-rate * t) + fast_share * np.exp(-4 * rate * t)
    turns = _FAT_PPM * _HZ_PER_PPM_AT_1P5_T * t[:, None]
    fat = (_FAT_SHARE * np.exp(2j * np.pi * turns)).sum(axis=1)
    rim = body & (x**2 + (y / 0.8) ** 2 + z > 0.38) & fat_layer
    share = np.where(rim, 0.95, np.where(liver, liver_fat, 0.0))[..., None]
    size = s0 * (1 + 0.2 * np.sin(7 * x + 5 * y + np.arange(shape[2]))) * body * (1 + rim)
    amplitude = size[..., None] * np.abs(1 - share + share * fat) * curve
    return Abdomen(amplitude=amplitude, times_ms=np.asarray(times_ms, float), body=body)
