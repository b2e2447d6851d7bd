"""Patches of tissue with a region in the middle: noise interpolated or not, truth known exactly.

Made with NumPy alone, as `tests.scenes`; noise has SD 1 on the real and imaginary part.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.fit import fit_r2star
from liverfe.grid import Grid
from liverfe.noise import NoiseLevel
from liverfe.regions import RegionRules, RegionSummary, summarise_region
from tests.scenes import TIMES_MS

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

AROUND_PER_S = 40.0
"""R2* of the tissue around the region."""


def square(size: int, side: int) -> Mask:
    """A square of `side` voxels in the middle of a slice of `size`."""
    mask = np.zeros((size, size, 1), dtype=bool)
    low = (size - side) // 2
    mask[low : low + side, low : low + side] = True
    return mask


def interpolated_noise(
    rng: np.random.Generator, size: int, n_echoes: int, factor: float
) -> NDArray[np.complex128]:
    """Complex noise of unit SD, shape (size, size, E), zero-filled by `factor` in k-space."""
    kept = round(size / factor)
    raw = rng.standard_normal((2, kept, kept, n_echoes))
    spectrum = np.zeros((size, size, n_echoes), dtype=complex)
    low = (size - kept) // 2
    spectrum[low : low + kept, low : low + kept] = raw[0] + 1j * raw[1]
    image = np.fft.ifft2(np.fft.ifftshift(spectrum, axes=(0, 1)), axes=(0, 1))
    return np.asarray(image * size**2 / kept)


@dataclass(frozen=True, kw_only=True)
class Patch:
    """How a patch is made and measured.

    Attributes
    ----------
    r2star_per_s : float
        Mean R2* of the region.
    snr : float
        S0 over sigma.
    side : int
        The region is a square of this many voxels.
    cv : float
        Spread of iron from voxel to voxel (gamma distributed), as a share.
    factor : float
        Interpolation of the images.
    sigma_relative_sd : float
        How far the sigma that is given scatters about the truth.
    size : int
        Voxels along the patch.
    times_ms : tuple of float
        Echo times in ms.
    """

    r2star_per_s: float
    snr: float = 50.0
    side: int = 10
    cv: float = 0.0
    factor: float = 1.0
    sigma_relative_sd: float = 0.0
    size: int = 32
    times_ms: tuple[float, ...] = tuple(TIMES_MS)

    def rates(self, rng: np.random.Generator) -> Array:
        """True R2* of each voxel of the region."""
        n = self.side**2
        if self.cv == 0.0:
            return np.full(n, self.r2star_per_s)
        return rng.gamma(1.0 / self.cv**2, self.r2star_per_s * self.cv**2, n)

    def measure(
        self,
        rng: np.random.Generator,
        *,
        rates: Array | None = None,
        s0: float | Array | None = None,
    ) -> tuple[RegionSummary, float]:
        """Draw a patch; give its region's summary and the true median of its voxels."""
        mask = square(self.size, self.side)
        times = np.array(self.times_ms)
        truth = self.rates(rng) if rates is None else rates
        rate = np.full(mask.shape, AROUND_PER_S)
        rate[mask] = truth
        level = np.full(mask.shape, self.snr)
        if s0 is not None:
            level[mask] = s0
        clean = level[..., None] * np.exp(-1e-3 * rate[..., None] * times)
        noise = interpolated_noise(rng, self.size, len(times), self.factor)
        stack = EchoStack(
            magnitude=np.abs(clean + noise[:, :, None]).astype(np.float32),
            echo_times_ms=times,
            grid=Grid(shape=mask.shape, affine_mm=np.eye(4)),
        )
        sigma = 1.0 + self.sigma_relative_sd * rng.standard_normal()
        level_of_noise = NoiseLevel(
            sigma=sigma, n_channels=1, method="given", relative_sd=self.sigma_relative_sd
        )
        fit = fit_r2star(stack, level_of_noise)
        summary = summarise_region(
            "liver", "liver", mask, stack, level_of_noise, fit, RegionRules()
        )
        return summary, float(np.median(truth))
