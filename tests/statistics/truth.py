"""Truth with noise, made with NumPy alone: what every row of the table is measured on.

Nothing here comes from the package's equations, only the nouns that carry arrays do. A decay is
``S0 exp(-R2* TE)``; noise is Gaussian on the real and imaginary part of each coil channel.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from liverfe.echoes import Acquisition, EchoStack
from liverfe.grid import Grid
from liverfe.outlines import LabelMask, Region

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

ECHO_SETS_MS = {
    "12 x 0.8 from 1.0": 1.0 + 0.8 * np.arange(12),
    "12 x 1.13 from 0.99": 0.99 + 1.13 * np.arange(12),
    "8 x 1.2 from 1.2": 1.2 * np.arange(1, 9),
    "8 x 2.2 from 1.3": 1.3 + 2.2 * np.arange(8),
    "12 x 0.7 from 0.8": 0.8 + 0.7 * np.arange(12),
}
"""The five echo sets of the methods sheet (4.2): number x spacing from the first, in ms."""
TWELVE_MS = ECHO_SETS_MS["12 x 0.8 from 1.0"]

SIZE = 112
S0 = 100.0
BODY_R2STAR_PER_S = 40.0
TILE = 20
TILES_A_SLICE = 9
"""Square regions of 400 voxels, three by three in each slice; together they are the liver."""


def decay(s0: ArrayLike, r2star_per_s: ArrayLike, times_ms: Array) -> Array:
    """Amplitudes S0 exp(-R2* TE), shape (..., E)."""
    s0, rate = (np.asarray(value, dtype=float)[..., None] for value in (s0, r2star_per_s))
    return np.asarray(s0 * np.exp(-1e-3 * rate * times_ms))


def magnitudes(
    amplitude: Array, rng: np.random.Generator, *, n: int = 1, sigma: ArrayLike = 1.0
) -> NDArray[np.float32]:
    """Root of the sum of squares of `n` complex channels, one of which carries the signal."""
    real = amplitude + sigma * rng.standard_normal(amplitude.shape)
    rest = np.asarray(sigma) ** 2 * rng.chisquare(2 * n - 1, amplitude.shape)
    return np.sqrt(real**2 + rest).astype(np.float32)


@dataclass(frozen=True, kw_only=True)
class Scan:
    """A scan of known truth: a body in air, its liver drawn in equal square regions."""

    stack: EchoStack
    sigma: Array
    """Noise SD per channel of each voxel, shape (X, Y, Z)."""
    body: Mask
    tiles: NDArray[np.int16]
    """Number of the square region that a voxel lies in, 0 elsewhere."""

    @property
    def regions(self) -> list[Region]:
        """The whole liver, which leads, and each square."""
        masks = {"whole liver": self.tiles > 0}
        masks |= {f"segment {k}": self.tiles == k for k in range(1, self.tiles.max() + 1)}
        grid = self.stack.grid
        return [
            Region(name=name, organ="liver", shape=LabelMask(mask=mask, grid=grid))
            for name, mask in masks.items()
        ]


def make_scan(
    r2star_per_s: float,
    rng: np.random.Generator,
    *,
    snr: float = 50.0,
    n: int = 1,
    slices: int = 4,
    times_ms: Array = TWELVE_MS,
    air: str = "noise",
    ramp: float = 1.0,
    interpolated: bool = False,
) -> Scan:
    """Make a scan whose liver decays at one rate.

    Parameters
    ----------
    r2star_per_s : float
        R2* of all of the liver.
    rng : Generator
        Chance.
    snr : float
        S0 over sigma, where sigma is at its mean over the image.
    n : int
        Channels of the sum of squares; the signal lies in one of them.
    slices : int
        Each has nine regions of 400 voxels.
    times_ms : ndarray of float64, shape (E,)
        Echo times.
    air : {'noise', 'zeroed'}
        Whether the background is noise, or was set to zero.
    ramp : float
        Sigma at the patient's right edge over sigma at the left one.
    interpolated : bool
        Whether the noise was measured at half the matrix and zero-filled to the double.
    """
    shape = (SIZE, SIZE, slices)
    body, tiles = _anatomy(slices)
    rate = np.where(tiles > 0, r2star_per_s, BODY_R2STAR_PER_S)
    amplitude = decay(np.where(body, S0, 0.0), rate, times_ms)
    across = np.linspace(1.0, ramp, SIZE)
    sigma = np.broadcast_to((S0 / snr * across / across.mean())[:, None, None], shape)
    spread = sigma[..., None]
    if interpolated:
        power = np.zeros(amplitude.shape)
        for channel in range(n):
            signal = amplitude if channel == 0 else 0.0
            noise = _zero_filled_noise(amplitude.shape, rng)
            power += (signal + spread * noise.real) ** 2 + (spread * noise.imag) ** 2
        magnitude = np.sqrt(power).astype(np.float32)
    else:
        magnitude = magnitudes(amplitude, rng, n=n, sigma=spread)
    if air == "zeroed":
        magnitude = np.where(body[..., None], magnitude, np.float32(0.0))
    stack = EchoStack(
        magnitude=magnitude,
        echo_times_ms=times_ms,
        grid=Grid(shape=shape, affine_mm=np.diag([2.0, 2.0, 8.0, 1.0])),
        acquisition=Acquisition(field_strength_t=1.5, imaging_frequency_mhz=63.87),
    )
    return Scan(stack=stack, sigma=sigma, body=body, tiles=tiles)


def _anatomy(slices: int) -> tuple[Mask, NDArray[np.int16]]:
    """A disc in air, and in its middle three by three squares in each slice."""
    x = np.linspace(-1.0, 1.0, SIZE)
    disc = x[:, None] ** 2 + x[None, :] ** 2 < 0.81
    body = np.repeat(disc[..., None], slices, axis=2)
    tiles = np.zeros(body.shape, dtype=np.int16)
    first = (SIZE - 3 * TILE) // 2
    for k in range(TILES_A_SLICE * slices):
        z, (i, j) = k // TILES_A_SLICE, divmod(k % TILES_A_SLICE, 3)
        here = (slice(first + i * TILE, first + (i + 1) * TILE),)
        there = (slice(first + j * TILE, first + (j + 1) * TILE),)
        tiles[(*here, *there, z)] = k + 1
    return body, tiles


def _zero_filled_noise(shape: tuple[int, ...], rng: np.random.Generator) -> NDArray[np.complex128]:
    """Complex noise of SD 1 a channel that fills half of k-space along both image axes."""
    half = (shape[0] // 2, shape[1] // 2, *shape[2:])
    spectrum = np.zeros(shape, dtype=complex)
    first = shape[0] // 4, shape[1] // 4
    inner = (slice(first[0], first[0] + half[0]), slice(first[1], first[1] + half[1]))
    spectrum[inner] = rng.standard_normal(half) + 1j * rng.standard_normal(half)
    image = np.fft.ifft2(np.fft.ifftshift(spectrum, axes=(0, 1)), axes=(0, 1))
    # Each of N / 4 unit noise terms is divided by N: the SD of a pixel is 1 / (2 sqrt(N)).
    return np.asarray(image * 2.0 * np.sqrt(shape[0] * shape[1]))
