"""`NoiseLevel`: how strong the noise is, and how that is known."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.errors import Finding


@dataclass(frozen=True, slots=True, kw_only=True)
class NoiseCandidate:
    """One way of estimating the noise, whether it was taken or not.

    Attributes
    ----------
    method : str
        ``air``, ``residual``, ``joint``, ``ceiling`` or ``given``.
    sigma : float or None
        Noise SD per real or imaginary channel, in signal units; None where the way was closed.
    n_channels : int
        Effective number of coil channels that goes with it.
    relative_sd : float or None
        Its own standard error, as a share of sigma.
    n_voxels : int
        Voxels behind it.
    remark : str
        Why it was taken or not, for the report.
    echo_scale_trend_per_s : float
        How fast the noise grows with echo time, 1/s: anything but zero says that the echoes are
        scaled differently.
    added_constant : float
        The constant that the background seems to stand on, signal units; 0 where on none.
    is_clipped : bool
        Whether single values of the background were set to zero, as after a subtraction.
    is_partial : bool
        Whether part of the background was masked: what is left is believed only if tissue agrees.
    """

    method: str
    sigma: float | None
    n_channels: int
    relative_sd: float | None
    n_voxels: int
    remark: str
    echo_scale_trend_per_s: float = 0.0
    added_constant: float = 0.0
    is_clipped: bool = False
    is_partial: bool = False


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class NoiseLevel:
    """The noise of a stack; every later step takes it from here and assumes nothing.

    Attributes
    ----------
    sigma : float
        Noise SD per real or imaginary channel, signal units; the median where `sigma_map` is set.
    n_channels : int
        Effective number of coil channels of the magnitude (1: Rician).
    method : str
        ``air``, ``residual``, ``joint``, ``ceiling`` or ``given``: the candidate that was chosen.
    relative_sd : float
        Standard error of `sigma` as a share of it.
    candidates : tuple of NoiseCandidate
        All ways that were tried, with the cross-check in their remarks.
    sigma_map : ndarray of float32, shape (X, Y, Z), or None
        Sigma of each voxel, where it varies over the image.
    channels_between : tuple of int, or None
        Fewest and most channels that nothing rules out; None where `n_channels` is known.
    findings : tuple of Finding
        Doubts about the noise.
    """

    sigma: float
    n_channels: int
    method: str
    relative_sd: float
    candidates: tuple[NoiseCandidate, ...] = ()
    sigma_map: NDArray[np.float32] | None = None
    channels_between: tuple[int, int] | None = None
    findings: tuple[Finding, ...] = ()

    def __post_init__(self) -> None:
        if not (np.isfinite(self.sigma) and self.sigma > 0):
            raise ValueError(f"sigma must be a positive number, not {self.sigma!r}")
        if self.n_channels < 1:
            raise ValueError(f"n_channels must be at least 1, not {self.n_channels!r}")
        if self.sigma_map is not None:
            sigma_map = np.array(self.sigma_map, dtype=np.float32, copy=True)
            sigma_map.flags.writeable = False
            object.__setattr__(self, "sigma_map", sigma_map)
