"""Suspects that bend a decay: a field gradient makes it concave, a slow or constant part convex."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from liverfe.regions.doubts.misfit import Misfit
from liverfe.regions.doubts.suspect import Suspect

Array = NDArray[np.float64]

_LEAST_LEFT = 0.05
_SLOW = ((0.0, 0.0), (20.0, 0.0), (0.0, 0.3))
"""R2* of the slow part: in 1/s (nothing; blood), and as a share of the voxel's own."""
_LARGEST_GROWTH = 30.0


def field_gradient(times_ms: Array) -> Suspect:
    """Suspect a field gradient through the voxel: the signal is multiplied by |sinc|.

    For a rectangular slice ``sinc(g dz t)`` (hernando2012; memory, high). The size is the square
    of the last echo time in units of the first zero's.
    """
    share = times_ms / times_ms[-1]

    def log_factor(size: Array, _: Misfit) -> Array:
        left = np.abs(np.sinc(np.sqrt(max(float(size[0]), 0.0)) * share))
        return np.asarray(np.log(np.maximum(left, _LEAST_LEFT)))

    return Suspect(kind="field-gradient", log_factor=log_factor, low=0.0, high=2.0)


def flattening(times_ms: Array) -> Iterator[Suspect]:
    """Suspect a part that decays slowly or not at all, or a constant in the images."""
    times = times_ms * 1e-3
    for variant, (per_s, share) in enumerate(_SLOW):

        def slow(size: Array, found: Misfit, per_s: float = per_s, share: float = share) -> Array:
            rate = found.rate_per_s[:, None]
            faster = np.maximum((1.0 - share) * rate - per_s, 0.0) * times
            return np.asarray(np.log1p(size[0] * np.expm1(np.minimum(faster, _LARGEST_GROWTH))))

        yield Suspect(
            kind="decay-flattens", log_factor=slow, low=0.0, high=0.9, choices=4,
            variant=variant, facts={"part": "slow-part"},
        )  # fmt: skip

    def constant(size: Array, found: Misfit) -> Array:
        return np.asarray(np.log(np.maximum(1.0 + size[0] / found.a, _LEAST_LEFT)))

    yield Suspect(
        kind="decay-flattens", log_factor=constant, low=-30.0, high=30.0,
        choices=4, variant=len(_SLOW), facts={"part": "constant-part"},
    )  # fmt: skip
