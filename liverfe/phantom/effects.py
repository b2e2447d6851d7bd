"""What a scan can add to a clean decay: fat, a field gradient, motion, a wrong order and the like.

Each effect is optional in a recipe (``[effects]``, and ``fat_fraction`` of a tissue) and none by
default. They are the phantom's own equations, as all of this room: what finds them in the images
borrows none. ``truth.json`` tells each one.
"""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["EffectsPlan", "MotionPlan", "fat_water", "gradient_loss", "true_times_ms", "with_ghost"]

_PROTON_MHZ_PER_T = 42.577478518
"""Proton gyromagnetic ratio over 2 pi (CODATA 2018)."""

_FAT_PEAKS: tuple[tuple[float, float], ...] = (
    (0.90, 0.088),
    (1.30, 0.700),
    (2.10, 0.120),
    (2.75, 0.006),
    (4.20, 0.039),
    (5.30, 0.047),
)
"""Chemical shift in ppm and relative amplitude of liver fat (Hamilton 2011; secondary)."""

_WATER_PPM = 4.70
"""Of water at 37 degrees Celsius."""


@dataclass(frozen=True, slots=True, kw_only=True)
class MotionPlan:
    """Some echoes that were disturbed.

    Attributes
    ----------
    echoes : tuple of int
        Places of the images, from 1.
    scale : float
        The body's signal in them is this times as strong.
    ghost : float
        A copy of the body is added in phase, this times as strong; may be below zero.
    shift_rows : int
        How many rows the copy is shifted by, around the edge.
    """

    echoes: tuple[int, ...]
    scale: float
    ghost: float
    shift_rows: int


@dataclass(frozen=True, slots=True, kw_only=True)
class EffectsPlan:
    """What went wrong in the scan; by default nothing.

    Attributes
    ----------
    field_gradient_ut_per_m : float
        Field gradient along the slice normal, everywhere.
    alternating_scale : float
        Every second echo (2, 4, ...) is this times as strong, as by a readout that runs back.
    motion : tuple of MotionPlan
        Disturbed echoes.
    lost_echo : int or None
        The echo (from 2) that never reached the files, which bear the stated times all the same:
        from this place on each image was taken one echo later.
    order : tuple of int
        Which echo (from 1) stands at each place; empty: as stated.
    saturation : float or None
        Signal above this is cut off, noise included.
    """

    field_gradient_ut_per_m: float = 0.0
    alternating_scale: float = 1.0
    motion: tuple[MotionPlan, ...] = ()
    lost_echo: int | None = None
    order: tuple[int, ...] = ()
    saturation: float | None = None


def true_times_ms(times_ms: tuple[float, ...], plan: EffectsPlan) -> tuple[float, ...]:
    """Tell when each image was really taken.

    Parameters
    ----------
    times_ms : tuple of float
        As the files state them.
    plan : EffectsPlan
        A lost echo or another order.

    Returns
    -------
    tuple of float
        In ms; after a lost echo the last one follows at the last spacing.
    """
    taken = list(times_ms)
    if plan.lost_echo is not None:
        extra = 2.0 * times_ms[-1] - times_ms[-2]
        taken = [*taken, extra]
        del taken[plan.lost_echo - 1]
    if plan.order:
        taken = [taken[echo - 1] for echo in plan.order]
    return tuple(round(time, 6) for time in taken)


def fat_water(fraction: float, time_ms: float, field_strength_t: float) -> complex:
    """Compute signal of water and fat together, over that at echo time zero.

    ``1 - f + f sum_p alpha_p exp(i 2 pi f_p TE)`` with ``f_p = (shift_p - water) gamma B0``: fat
    precesses slower, so its phase falls behind.

    Parameters
    ----------
    fraction : float
        Share f of the signal that is fat, 0 to 1.
    time_ms : float
        Echo time.
    field_strength_t : float
        Field that the scanner runs at.

    Returns
    -------
    complex
        1 without fat.
    """
    total = sum(amplitude for _, amplitude in _FAT_PEAKS)
    fat = 0j
    for shift_ppm, amplitude in _FAT_PEAKS:
        hertz = (shift_ppm - _WATER_PPM) * _PROTON_MHZ_PER_T * field_strength_t
        turns = hertz * time_ms / 1000.0
        fat += amplitude / total * cmath.exp(2j * math.pi * turns)
    return 1.0 - fraction + fraction * fat


def gradient_loss(gradient_ut_per_m: float, thickness_mm: float, time_ms: float) -> float:
    """Compute what a field gradient through a rectangular slice leaves of the signal.

    ``|sin(pi x) / (pi x)|`` with ``x = gamma G dz TE``, the turns from one face to the other.

    Parameters
    ----------
    gradient_ut_per_m : float
        Gradient G along the slice normal, in microtesla per metre.
    thickness_mm : float
        Slice thickness dz.
    time_ms : float
        Echo time.

    Returns
    -------
    float
        1 without a gradient.
    """
    hertz = _PROTON_MHZ_PER_T * gradient_ut_per_m * thickness_mm / 1000.0
    turns = math.pi * hertz * time_ms / 1000.0
    return abs(math.sin(turns) / turns) if turns else 1.0


def with_ghost(clean: NDArray[np.float32], plan: EffectsPlan, place: int) -> NDArray[np.float32]:
    """Disturb one image.

    Parameters
    ----------
    clean : ndarray of float32, shape (X, Y, Z)
        Noise-free magnitude.
    plan : EffectsPlan
        Whose motion and alternation apply.
    place : int
        Place of the image, from 1.

    Returns
    -------
    ndarray of float32
        Scaled, with its ghosts; not negative.
    """
    scale = plan.alternating_scale if place % 2 == 0 else 1.0
    image = clean if scale == 1.0 else clean * np.float32(scale)
    for motion in plan.motion:
        if place in motion.echoes:
            moved = image * np.float32(motion.scale)
            if motion.ghost:
                moved = moved + np.float32(motion.ghost) * np.roll(image, motion.shift_rows, axis=1)
            image = np.abs(moved)
    return image
