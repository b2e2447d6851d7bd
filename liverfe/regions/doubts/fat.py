"""Suspect: fat beside water, which comes in and out of phase with echo time."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.regions.doubts.suspect import Suspect

Array = NDArray[np.float64]

_SHIFTS_PPM = np.array([0.90, 1.30, 2.10, 2.75, 4.20, 5.30])
_AMPLITUDES = np.array([0.088, 0.700, 0.120, 0.006, 0.039, 0.047])
"""Liver fat, six peaks (hamilton2011; secondary)."""
_WATER_PPM = 4.70
"""At 37 degrees Celsius (memory, high)."""
_MHZ_PER_T = 42.577478518
"""Proton gyromagnetic ratio over 2 pi (CODATA)."""
_LEAST_LEFT = 0.05
"""Where fat and water cancel, this share of the signal stays: voxels differ."""


def fat(times_ms: Array, field_strength_t: float | None) -> Suspect | None:
    """Suspect fat, one fraction for the region; None where the field is not known."""
    if field_strength_t is None:
        return None
    hertz = (_SHIFTS_PPM - _WATER_PPM) * _MHZ_PER_T * field_strength_t
    turns = np.exp(2j * np.pi * hertz[:, None] * times_ms * 1e-3)
    phasor = (_AMPLITUDES / _AMPLITUDES.sum()) @ turns

    def log_factor(size: Array, _: object) -> Array:
        fraction = min(float(size[0]), 1.0)
        return np.asarray(np.log(np.maximum(np.abs(1.0 - fraction * (1.0 - phasor)), _LEAST_LEFT)))

    return Suspect(kind="fat-oscillation", log_factor=log_factor, low=0.0, high=0.9)
