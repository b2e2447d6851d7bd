"""`DecayMaps`: each voxel of a fit, judged."""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from liverfe.grid import Grid


class VoxelStatus(IntEnum):
    """What may be said of a voxel; the values of the status map that is exported."""

    OUTSIDE = 0
    """No signal, or no complete set of echoes: air, mostly."""
    MEASURED = 1
    OVER_LIMIT = 2
    """Faster decay than this scan can resolve; inside a region also a voxel without signal."""
    UNDER_LIMIT = 3
    """Decay too slow to tell from none at all."""
    FAILED = 4
    """The fit did not converge."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class DecayMaps:
    """Maps of a study on the grid of its stack.

    Attributes
    ----------
    grid : Grid
        Where the voxels lie.
    r2star_per_s, t2star_ms, s0, r2star_se_per_s, reduced_chi2 : ndarray of float32, shape (X, Y, Z)
        As in `DecayFit`; NaN wherever the status is not MEASURED.
    status : ndarray of uint8, shape (X, Y, Z)
        A `VoxelStatus` each.
    no_signal : ndarray of bool, shape (X, Y, Z)
        Voxels whose echoes together are noise.
    """

    grid: Grid
    r2star_per_s: NDArray[np.float32]
    t2star_ms: NDArray[np.float32]
    s0: NDArray[np.float32]
    r2star_se_per_s: NDArray[np.float32]
    reduced_chi2: NDArray[np.float32]
    status: NDArray[np.uint8]
    no_signal: NDArray[np.bool_]

    def __post_init__(self) -> None:
        for name in self.__slots__:
            if name == "grid":
                continue
            array = getattr(self, name)
            if array.shape != self.grid.shape:
                raise ValueError(f"{name} has shape {array.shape}, not {self.grid.shape}")
            view = array.view()
            view.flags.writeable = False
            object.__setattr__(self, name, view)
