"""The images as they would be without noise: decay of each voxel, and what the scan did to it."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from liverfe.phantom.abdomen import StructureMap
from liverfe.phantom.effects import fat_water, gradient_loss, true_times_ms, with_ghost
from liverfe.phantom.recipe import Recipe
from liverfe.phantom.signal import amplitude

__all__ = ["CleanImages"]

Map = NDArray[np.float32]


@dataclass(frozen=True)
class CleanImages:
    """Noise-free images of a recipe, one echo at a time.

    Attributes
    ----------
    recipe : Recipe
        Echo times, fat of each tissue, and effects.
    structures : StructureMap
        What each voxel is.
    s0, r2star_per_s : ndarray of float32, shape (X, Y, Z)
        True signal at echo time zero, and R2* in 1/s.
    """

    recipe: Recipe
    structures: StructureMap
    s0: Map
    r2star_per_s: Map
    _times_ms: tuple[float, ...] = field(init=False)

    def __post_init__(self) -> None:
        times = true_times_ms(self.recipe.echo_times_ms, self.recipe.effects)
        object.__setattr__(self, "_times_ms", times)

    @property
    def n_echoes(self) -> int:
        """How many images there are of each slice."""
        return len(self._times_ms)

    def magnitude(self, echo: int) -> Map:
        """Compute the magnitude of one echo.

        Parameters
        ----------
        echo : int
            Place of the image, from 0.

        Returns
        -------
        ndarray of float32, shape (X, Y, Z)
            Decay, fat, field gradient, then motion and alternation.
        """
        time_ms, plan = self._times_ms[echo], self.recipe.effects
        image = amplitude(self.s0, self.r2star_per_s, time_ms)
        mixture = self._mixture(time_ms)
        if mixture is not None:
            image = image * np.abs(mixture)
        if plan.field_gradient_ut_per_m:
            thickness = self.recipe.geometry.slice_thickness_mm
            left = gradient_loss(plan.field_gradient_ut_per_m, thickness, time_ms)
            image = image * np.float32(left)
        return with_ghost(image, plan, echo + 1)

    def phase_rad(self, echo: int, off_resonance_hz: Map) -> Map:
        """Compute the phase of one echo, from the field offset and from fat.

        Parameters
        ----------
        echo : int
            Place of the image, from 0.
        off_resonance_hz : ndarray of float32, shape (X, Y, Z)
            Field offset.

        Returns
        -------
        ndarray of float32, shape (X, Y, Z)
            In radians, not wrapped.
        """
        time_ms = self._times_ms[echo]
        phase = np.asarray(off_resonance_hz * np.float32(2e-3 * np.pi * time_ms))
        mixture = self._mixture(time_ms)
        return phase if mixture is None else phase + np.angle(mixture)

    def _mixture(self, time_ms: float) -> NDArray[np.complex64] | None:
        """Water and fat of each voxel over its signal at time zero; None where none holds fat."""
        field_t = self.recipe.scanner.true_field_t
        fat = {tissue.name: tissue.fat_fraction for tissue in self.recipe.tissues}
        if field_t is None or not any(fat.values()):
            return None
        by_label = [1.0 + 0j] + [
            fat_water(fat[tissue], time_ms, field_t) for tissue in self.structures.tissues
        ]
        return np.array(by_label, dtype=np.complex64)[self.structures.labels]
