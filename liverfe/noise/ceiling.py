"""An upper bound of sigma, for scans that leave no way to measure it.

Two echoes leave no residual, and where the background is masked or full of ghosts as well, sigma
is not known. But the log ratio of the two echoes differs between voxels of one tissue by noise and
by iron, so its scatter is never less than noise alone would give.
"""

from __future__ import annotations

import numpy as np
from scipy.special import chdtri

from liverfe.echoes import EchoStack
from liverfe.noise.level import NoiseCandidate
from liverfe.noise.triplets import bright_triplets

_ENOUGH_PAIRS = 200
_HIGH_SIGNAL = 8.0
"""The last echo of most pairs must be above this many times the bound, or it bounds nothing: then
noise is as large as the signal."""
_RELATIVE_SD = 0.05
"""What is claimed of a bound: it only has to be one."""


def sigma_ceiling(stack: EchoStack) -> NoiseCandidate:
    """Bound sigma from above by the scatter of decays between voxels of one tissue.

    With ``d`` the difference of ``ln(M1 / Mlast)`` between two partners,
    ``d² / (sum of 1 / M²)`` is sigma² times chi-square of one degree if both decay alike, and more
    if they do not.

    Parameters
    ----------
    stack : EchoStack
        Magnitudes in true values, at least two echoes.

    Returns
    -------
    NoiseCandidate
        The bound, or sigma None where there are too few voxels of high signal.
    """
    square = bright_triplets(stack).square[[0, 2]][..., [0, -1]]
    known = (square > 0).all(axis=(0, 2))
    square = square[:, known]
    sigma, remark = None, "too few voxels of one tissue with high signal"
    if square.shape[1] >= _ENOUGH_PAIRS:
        logs = 0.5 * np.log(square[..., 0] / square[..., 1])
        weight = 1.0 / (1.0 / square).sum(axis=(0, 2))
        estimate = np.median(weight * (logs[0] - logs[1]) ** 2) / chdtri(1, 0.5)
        bound = float(np.sqrt(estimate))
        if bound > 0.0 and np.median(square[..., 1]) > (_HIGH_SIGNAL * bound) ** 2:
            sigma, remark = bound, "upper bound from the scatter of decays in one tissue"
    return NoiseCandidate(
        method="ceiling",
        sigma=sigma,
        n_channels=1,
        relative_sd=None if sigma is None else _RELATIVE_SD,
        n_voxels=square.shape[1],
        remark=remark,
    )
