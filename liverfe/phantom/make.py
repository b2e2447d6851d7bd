"""`Phantom`: a recipe carried out, with the truth beside the images."""

from __future__ import annotations

import dataclasses
import hashlib
import uuid
from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import Acquisition, EchoStack, Subject, settle_field_strength
from liverfe.errors import UsageError
from liverfe.grid import Grid
from liverfe.phantom.abdomen import StructureMap, draw_abdomen
from liverfe.phantom.clean import CleanImages
from liverfe.phantom.drawn import draw_regions
from liverfe.phantom.geometry import grid_of
from liverfe.phantom.recipe import Recipe
from liverfe.phantom.signal import gamma_r2star_per_s, received, stored_counts

__all__ = ["Phantom", "make_phantom", "scan_again"]

_UID_NAMESPACE = uuid.uuid5(uuid.NAMESPACE_OID, "liverfe.phantom")
"""Root of the name-based UUIDs (RFC 9562, version 5) that serve as DICOM UIDs under 2.25."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Phantom:
    """A synthetic scan and its truth.

    Attributes
    ----------
    recipe : Recipe
        What it was made from.
    grid : Grid
        Voxels; X runs to the patient's left, Y to the back, Z to the head (as DICOM axial).
    structures : StructureMap
        What each voxel is.
    r2star_per_s : ndarray of float32, shape (X, Y, Z)
        True R2*, in 1/s; NaN in air.
    s0 : ndarray of float32, shape (X, Y, Z)
        True signal at echo time zero; 0 in air.
    off_resonance_hz : ndarray of float32, shape (X, Y, Z)
        True field offset, which turns the phase.
    regions : ndarray of uint8, shape (X, Y, Z)
        Label 1, 2, ... of `recipe.regions`; 0 elsewhere.
    magnitude : ndarray of float32, shape (X, Y, Z, E)
        Noisy magnitude before it is rounded for storage.
    stored : ndarray of uint16, shape (X, Y, Z, E)
        The counts that files hold: signal = count x slope of its echo.
    phase_rad : ndarray of float32, shape (X, Y, Z, E), or None
        Noisy phase in [-pi, pi], where it was asked for.
    fingerprint : str
        SHA-256 over the recipe and the first echo's counts, as hexadecimal text.
    """

    recipe: Recipe
    grid: Grid
    structures: StructureMap
    r2star_per_s: NDArray[np.float32]
    s0: NDArray[np.float32]
    off_resonance_hz: NDArray[np.float32]
    regions: NDArray[np.uint8]
    magnitude: NDArray[np.float32]
    stored: NDArray[np.uint16]
    phase_rad: NDArray[np.float32] | None
    fingerprint: str = field(init=False)

    def __post_init__(self) -> None:
        digest = hashlib.sha256(self.recipe.digest.encode())
        digest.update(np.ascontiguousarray(self.stored[..., 0]).tobytes())
        object.__setattr__(self, "fingerprint", digest.hexdigest())
        # The arrays are large and only the makers below hold them, so they are locked uncopied.
        for spec in dataclasses.fields(self):
            array = getattr(self, spec.name)
            if isinstance(array, np.ndarray):
                view = array.view()
                view.flags.writeable = False
                object.__setattr__(self, spec.name, view)

    def clean_magnitude(self) -> NDArray[np.float32]:
        """Compute the noise-free magnitude; float32, shape (X, Y, Z, E)."""
        clean = CleanImages(self.recipe, self.structures, self.s0, self.r2star_per_s)
        return np.stack([clean.magnitude(e) for e in range(clean.n_echoes)], axis=-1)

    def clean_complex(self) -> NDArray[np.complex64]:
        """Compute the noise-free complex signal; complex64, shape (X, Y, Z, E)."""
        clean = CleanImages(self.recipe, self.structures, self.s0, self.r2star_per_s)
        phase = [clean.phase_rad(e, self.off_resonance_hz) for e in range(clean.n_echoes)]
        return np.asarray(
            self.clean_magnitude() * np.exp(1j * np.stack(phase, axis=-1)), dtype=np.complex64
        )

    def stored_signal(self) -> NDArray[np.float32]:
        """Compute what the stored counts mean: count x slope; float32, shape (X, Y, Z, E)."""
        slopes = np.array(self.recipe.storage.slope_per_echo, dtype=np.float32)
        return np.asarray(self.stored * slopes, dtype=np.float32)

    def stack(self) -> EchoStack:
        """Return what a reader of the files must find: stored counts times slope.

        Returns
        -------
        EchoStack
            With the settled field strength, and marked as synthetic.
        """
        scanner = self.recipe.scanner
        field_t, findings = settle_field_strength(
            scanner.field_strength_t, scanner.imaging_frequency_mhz
        )
        return EchoStack(
            magnitude=self.stored_signal(),
            echo_times_ms=np.array(self.recipe.echo_times_ms),
            grid=self.grid,
            acquisition=Acquisition(
                field_strength_t=field_t,
                imaging_frequency_mhz=scanner.imaging_frequency_mhz,
                scanner="liverfe phantom",
                repetition_time_ms=scanner.repetition_time_ms,
                flip_angle_deg=scanner.flip_angle_deg,
                is_synthetic=True,
            ),
            subject=Subject(study_uid=self.uid("study"), study_date=self.recipe.study_date),
            layout="phantom in memory",
            findings=findings,
        )

    def uid(self, *parts: object) -> str:
        """Make a DICOM UID from the fingerprint: same phantom and parts, same UID.

        Parameters
        ----------
        *parts : object
            What tells this object from the others, for example layout, ``series``, number.

        Returns
        -------
        str
            Under 2.25, from a name-based UUID (DICOM PS3.5 B.2).
        """
        return uid_from(self.fingerprint, *parts)


def uid_from(*parts: object) -> str:
    """Make a DICOM UID under 2.25 from a name-based UUID of `parts`."""
    return f"2.25.{uuid.uuid5(_UID_NAMESPACE, '/'.join(map(str, parts))).int}"


def make_phantom(recipe: Recipe, rng: np.random.Generator, *, with_phase: bool = False) -> Phantom:
    """Carry out a recipe.

    Parameters
    ----------
    recipe : Recipe
        From `load_recipe`.
    rng : numpy.random.Generator
        Source of all chance; `numpy.random.default_rng(recipe.seed)` gives the study that the
        recipe means.
    with_phase : bool
        Whether to keep the phase too. It changes no magnitude.

    Returns
    -------
    Phantom
        Images and truth.

    Raises
    ------
    UsageError
        If the signal does not fit the bits to store, or a region holds no voxel.
    """
    iron_rng, noise_rng = rng.spawn(2)
    grid = grid_of(recipe.geometry)
    structures = draw_abdomen(grid, recipe.anatomy)
    r2star_per_s, s0 = _truth(recipe, structures, iron_rng)
    ramp = np.linspace(-1.0, 1.0, grid.shape[0], dtype=np.float32)[:, None, None]
    off_resonance_hz = np.float32(recipe.scanner.off_resonance_hz) * np.broadcast_to(
        ramp, grid.shape
    )
    clean = CleanImages(recipe, structures, s0, r2star_per_s)
    images = _scan(clean, off_resonance_hz if with_phase else None, noise_rng)
    return Phantom(
        recipe=recipe,
        grid=grid,
        structures=structures,
        r2star_per_s=r2star_per_s,
        s0=s0,
        off_resonance_hz=off_resonance_hz,
        regions=draw_regions(recipe, structures, grid),
        magnitude=images.magnitude,
        stored=images.stored,
        phase_rad=images.phase_rad,
    )


def scan_again(phantom: Phantom, rng: np.random.Generator) -> Phantom:
    """Scan the same object once more: same truth, new noise.

    Parameters
    ----------
    phantom : Phantom
        The first scan.
    rng : numpy.random.Generator
        Source of the new noise.

    Returns
    -------
    Phantom
        With phase where the first one has it.
    """
    off_resonance_hz = None if phantom.phase_rad is None else phantom.off_resonance_hz
    clean = CleanImages(phantom.recipe, phantom.structures, phantom.s0, phantom.r2star_per_s)
    images = _scan(clean, off_resonance_hz, rng)
    return dataclasses.replace(
        phantom, magnitude=images.magnitude, stored=images.stored, phase_rad=images.phase_rad
    )


def _truth(
    recipe: Recipe, structures: StructureMap, rng: np.random.Generator
) -> tuple[NDArray[np.float32], NDArray[np.float32]]:
    r2star_per_s = np.full(structures.labels.shape, np.nan, dtype=np.float32)
    s0 = np.zeros(structures.labels.shape, dtype=np.float32)
    for tissue in recipe.tissues:
        names = tuple(
            name
            for name, made_of in zip(structures.names, structures.tissues, strict=True)
            if made_of == tissue.name
        )
        where = structures.mask(names)
        s0[where] = tissue.s0
        r2star_per_s[where] = gamma_r2star_per_s(
            tissue.r2star_per_s, tissue.heterogeneity_cv, int(where.sum()), rng
        )
    return r2star_per_s, s0


class _Images(NamedTuple):
    magnitude: NDArray[np.float32]
    stored: NDArray[np.uint16]
    phase_rad: NDArray[np.float32] | None


def _scan(
    clean: CleanImages, off_resonance_hz: NDArray[np.float32] | None, rng: np.random.Generator
) -> _Images:
    """Receive all echoes; the phase too where a field offset is given."""
    recipe = clean.recipe
    shape = (*clean.s0.shape, clean.n_echoes)
    magnitude = np.empty(shape, dtype=np.float32)
    stored = np.empty(shape, dtype=np.uint16)
    phase_rad = None if off_resonance_hz is None else np.empty(shape, dtype=np.float32)
    for e in range(clean.n_echoes):
        image, summed = received(
            clean.magnitude(e),
            sigma=recipe.noise.sigma,
            n_channels=recipe.noise.n_channels,
            rng=rng,
        )
        if recipe.effects.saturation is not None:
            image = np.minimum(image, np.float32(recipe.effects.saturation))
        slope = recipe.storage.slope_per_echo[e]
        _refuse_overflow(recipe, float(image.max()) / slope)
        magnitude[..., e] = image
        stored[..., e] = stored_counts(image, slope)
        if phase_rad is not None and off_resonance_hz is not None:
            turned = clean.phase_rad(e, off_resonance_hz) + np.angle(summed)
            phase_rad[..., e] = np.angle(np.exp(1j * turned))
    return _Images(magnitude, stored, phase_rad)


def _refuse_overflow(recipe: Recipe, largest_count: float) -> None:
    limit = 2**recipe.storage.bits - 1
    if largest_count >= limit + 0.5:
        raise UsageError(
            f"recipe {recipe.name}: storage.slope: the strongest signal needs {largest_count:.0f} "
            f"counts and {recipe.storage.bits} bits hold {limit}; choose a larger slope"
        )
