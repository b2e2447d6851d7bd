"""`Recipe`: what a synthetic study shall be, each quantity with its unit in its name."""

from __future__ import annotations

import dataclasses
import hashlib
import json
from dataclasses import dataclass, field
from datetime import date

from liverfe.phantom.effects import EffectsPlan
from liverfe.units import field_t_from_frequency_mhz

__all__ = [
    "AnatomyPlan",
    "GeometryPlan",
    "NoisePlan",
    "Recipe",
    "RegionPlan",
    "ScannerPlan",
    "StoragePlan",
    "TissuePlan",
]


@dataclass(frozen=True, slots=True, kw_only=True)
class ScannerPlan:
    """The scanner that the files name.

    Attributes
    ----------
    field_strength_t : float or None
        As DICOM (0018,0087) shall state it; None leaves the tag out.
    imaging_frequency_mhz : float or None
        DICOM (0018,0084); None leaves the tag out.
    repetition_time_ms, flip_angle_deg : float
        Stated only: longitudinal relaxation is not simulated.
    off_resonance_hz : float
        Height of a smooth left-to-right field ramp; it moves the phase and no magnitude.
    """

    field_strength_t: float | None
    imaging_frequency_mhz: float | None
    repetition_time_ms: float
    flip_angle_deg: float
    off_resonance_hz: float

    @property
    def true_field_t(self) -> float | None:
        """The field that the imaging frequency means, else the stated one, in T."""
        if self.imaging_frequency_mhz is not None:
            return field_t_from_frequency_mhz(self.imaging_frequency_mhz)
        return self.field_strength_t


@dataclass(frozen=True, slots=True, kw_only=True)
class GeometryPlan:
    """Where the image voxels lie.

    Attributes
    ----------
    columns, rows, slices : int
        Size of the matrix as DICOM counts it: `columns` voxels in a row.
    pixel_size_mm : tuple of float
        Distance between columns, then between rows.
    slice_thickness_mm, slice_spacing_mm : float
        Thickness of a slice, and distance between the centres of neighbouring slices.
    centre_mm : tuple of float
        Centre of the volume in RAS+ millimetres.
    oblique_axis : str
        Patient axis (``x`` right, ``y`` anterior, ``z`` superior) that an axial stack is turned
        about.
    oblique_angle_deg : float
        By how much; 0 is axial.
    """

    columns: int
    rows: int
    slices: int
    pixel_size_mm: tuple[float, float]
    slice_thickness_mm: float
    slice_spacing_mm: float
    centre_mm: tuple[float, float, float]
    oblique_axis: str
    oblique_angle_deg: float


@dataclass(frozen=True, slots=True, kw_only=True)
class NoisePlan:
    """Noise of the receiver.

    Attributes
    ----------
    sigma : float
        Standard deviation of the Gaussian noise on the real and on the imaginary part of each
        channel, in units of the signal.
    n_channels : int
        Channels combined by root sum of squares; 1 gives Rician magnitude.
    """

    sigma: float
    n_channels: int


@dataclass(frozen=True, slots=True, kw_only=True)
class StoragePlan:
    """How signal becomes whole numbers.

    Attributes
    ----------
    slope_per_echo : tuple of float
        Signal units of one stored count, for each echo: value = count x slope.
    bits : int
        Bits stored, 8 to 15; a signal that does not fit is refused, never clipped.
    """

    slope_per_echo: tuple[float, ...]
    bits: int


@dataclass(frozen=True, slots=True, kw_only=True)
class AnatomyPlan:
    """Which body the images show, and its size.

    Attributes
    ----------
    kind : str
        ``abdomen`` is the one body there is.
    body_half_width_mm, body_half_depth_mm : float
        Half axes of the body's outline, left to right and front to back.
    fat_layer_mm, body_wall_mm : float
        Thickness of the subcutaneous fat and of the muscle below it.
    """

    kind: str
    body_half_width_mm: float
    body_half_depth_mm: float
    fat_layer_mm: float
    body_wall_mm: float


@dataclass(frozen=True, slots=True, kw_only=True)
class TissuePlan:
    """One tissue.

    Attributes
    ----------
    name : str
        As the anatomy calls it.
    r2star_per_s : float
        Mean true R2*, in 1/s.
    heterogeneity_cv : float
        Coefficient of variation of R2* from voxel to voxel, gamma distributed; 0 is uniform.
    s0 : float
        Signal at echo time zero.
    fat_fraction : float
        Share of the signal that is fat, which oscillates against water.
    """

    name: str
    r2star_per_s: float
    heterogeneity_cv: float
    s0: float
    fat_fraction: float = 0.0


@dataclass(frozen=True, slots=True, kw_only=True)
class RegionPlan:
    """One region that comes with the study, as a careful reader would draw it.

    Attributes
    ----------
    name : str
        As the label table and the outline file give it.
    structures : tuple of str
        Structures of the anatomy that it covers.
    margin_mm : float
        Distance kept in-plane from everything else.
    """

    name: str
    structures: tuple[str, ...]
    margin_mm: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Recipe:
    """A synthetic study: same recipe and seed, same files to the last bit.

    Attributes
    ----------
    name : str
        The file's stem.
    title, story : str
        What it is, and why it exists; invented and marked as such.
    seed : int
        Of all chance in it.
    study_date : date
        Date that the files bear.
    scanner : ScannerPlan
        What the files say of the scanner.
    echo_times_ms : tuple of float
        Strictly ascending.
    geometry : GeometryPlan
        Where the image voxels lie.
    noise : NoisePlan
        Noise of the receiver.
    storage : StoragePlan
        How signal becomes whole numbers.
    anatomy : AnatomyPlan
        Which body, and its size.
    tissues : tuple of TissuePlan
        Every tissue of that body.
    regions : tuple of RegionPlan
        Regions that come with the study; label 1, 2, ... in this order.
    effects : EffectsPlan
        What went wrong in the scan; by default nothing.
    """

    name: str
    title: str
    story: str
    seed: int
    study_date: date
    scanner: ScannerPlan
    echo_times_ms: tuple[float, ...]
    geometry: GeometryPlan
    noise: NoisePlan
    storage: StoragePlan
    anatomy: AnatomyPlan
    tissues: tuple[TissuePlan, ...]
    regions: tuple[RegionPlan, ...]
    effects: EffectsPlan = field(default_factory=EffectsPlan)

    def with_seed(self, seed: int) -> Recipe:
        """Return the same recipe with another seed."""
        return dataclasses.replace(self, seed=seed)

    def tissue(self, name: str) -> TissuePlan:
        """Return the tissue called `name`.

        Parameters
        ----------
        name : str
            As the anatomy calls it.

        Returns
        -------
        TissuePlan
            What the recipe says of it.

        Raises
        ------
        KeyError
            If there is none.
        """
        for tissue in self.tissues:
            if tissue.name == name:
                return tissue
        raise KeyError(name)

    @property
    def digest(self) -> str:
        """SHA-256 of everything in the recipe, the seed included, as hexadecimal text."""
        everything = dataclasses.asdict(self)
        # What a recipe does not ask for is no part of it: one written before an effect was known
        # stays the same study.
        if self.effects == EffectsPlan():
            del everything["effects"]
        for tissue in everything["tissues"]:
            if not tissue["fat_fraction"]:
                del tissue["fat_fraction"]
        plain = json.dumps(everything, sort_keys=True, default=str)
        return hashlib.sha256(plain.encode()).hexdigest()
