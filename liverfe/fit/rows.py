"""`DecayRows`: fits of a list of voxels, before they are put back on a grid."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class DecayRows:
    """Fits of V voxels.

    Attributes
    ----------
    r2star_per_s, s0, r2star_se_per_s, reduced_chi2 : ndarray of float32, shape (V,)
        As in `DecayFit`.
    outcome : ndarray of uint8, shape (V,)
        A `FitOutcome` each.
    """

    r2star_per_s: NDArray[np.float32]
    s0: NDArray[np.float32]
    r2star_se_per_s: NDArray[np.float32]
    reduced_chi2: NDArray[np.float32]
    outcome: NDArray[np.uint8]

    @classmethod
    def empty(cls, n_voxels: int) -> DecayRows:
        """Rows that say NOT_FITTED, with NaN everywhere."""
        nan = [np.full(n_voxels, np.nan, dtype=np.float32) for _ in range(4)]
        return cls(
            r2star_per_s=nan[0],
            s0=nan[1],
            r2star_se_per_s=nan[2],
            reduced_chi2=nan[3],
            outcome=np.zeros(n_voxels, dtype=np.uint8),
        )

    @classmethod
    def unwritten(cls, n_voxels: int) -> DecayRows:
        """Rows that hold anything, for a fit that writes every one."""
        return cls(
            r2star_per_s=np.empty(n_voxels, dtype=np.float32),
            s0=np.empty(n_voxels, dtype=np.float32),
            r2star_se_per_s=np.empty(n_voxels, dtype=np.float32),
            reduced_chi2=np.empty(n_voxels, dtype=np.float32),
            outcome=np.empty(n_voxels, dtype=np.uint8),
        )

    def part(self, block: slice) -> DecayRows:
        """A view of some rows: what is written to it is written here.

        Parameters
        ----------
        block : slice
            Which.

        Returns
        -------
        DecayRows
            Of those rows.
        """
        return DecayRows(**{name: getattr(self, name)[block] for name in self.__slots__})

    def copy_of(self, which: NDArray[np.intp]) -> DecayRows:
        """Copy the rows named.

        Parameters
        ----------
        which : ndarray of intp, shape (R,)
            Their numbers.

        Returns
        -------
        DecayRows
            R rows.
        """
        return DecayRows(**{name: getattr(self, name)[which] for name in self.__slots__})

    def put(self, which: NDArray[np.intp], rows: DecayRows) -> None:
        """Write rows over those named.

        Parameters
        ----------
        which : ndarray of intp, shape (R,)
            Their numbers.
        rows : DecayRows
            R rows.
        """
        for name in self.__slots__:
            getattr(self, name)[which] = getattr(rows, name)
