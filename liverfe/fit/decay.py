"""`DecayFit`: what a fit says of each voxel."""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray


class FitOutcome(IntEnum):
    """How the fit of one voxel ended."""

    NOT_FITTED = 0
    """An echo that counts is missing or no magnitude, or fewer count than the fit needs."""
    CONVERGED = 1
    AT_LOWER_BOUND = 2
    """No decay could be resolved: R2* ran to zero."""
    AT_UPPER_BOUND = 3
    """The decay is faster than any this scan could show."""
    NOT_CONVERGED = 4
    NO_SIGNAL = 5
    """All echoes together are not distinguishable from noise."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class DecayFit:
    """A decay fitted to every voxel of a stack.

    Attributes
    ----------
    estimator : str
        Its key, for example ``rician-ml``.
    r2star_per_s : ndarray of float32, shape (X, Y, Z)
        R2* in 1/s; NaN unless the outcome is CONVERGED or AT_LOWER_BOUND.
    s0 : ndarray of float32, shape (X, Y, Z)
        Signal at echo time zero, signal units; NaN likewise.
    r2star_se_per_s : ndarray of float32, shape (X, Y, Z)
        Standard error of R2* from the Fisher information at the fit, 1/s.
    reduced_chi2 : ndarray of float32, shape (X, Y, Z)
        Misfit over its expectation: about 1 where model and noise are right; NaN with two echoes.
    outcome : ndarray of uint8, shape (X, Y, Z)
        A `FitOutcome` each.
    """

    estimator: str
    r2star_per_s: NDArray[np.float32]
    s0: NDArray[np.float32]
    r2star_se_per_s: NDArray[np.float32]
    reduced_chi2: NDArray[np.float32]
    outcome: NDArray[np.uint8]

    def __post_init__(self) -> None:
        shape = self.r2star_per_s.shape
        for name in ("r2star_per_s", "s0", "r2star_se_per_s", "reduced_chi2", "outcome"):
            array = getattr(self, name)
            if array.shape != shape:
                raise ValueError(f"{name} has shape {array.shape}, not {shape}")
            view = array.view()
            view.flags.writeable = False
            object.__setattr__(self, name, view)
