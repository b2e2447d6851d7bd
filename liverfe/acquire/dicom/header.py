"""`ImageHeader`: all that the header of one image says that matters to us."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from liverfe.echoes import Acquisition, Subject

Kind = Literal["magnitude", "phase", "real", "imaginary", "mixed", "derived", "mosaic", "unknown"]

Vector = tuple[float, float, float]


@dataclass(frozen=True, slots=True, kw_only=True)
class StoredPixels:
    """Where and how the values of one image lie in a file.

    Attributes
    ----------
    path : Path
        The file.
    n_file_bytes : int
        Its size.
    header_digest : bytes
        Digest of all bytes before the pixel values: a file that changes after its header was
        read is noticed when its pixels are.
    offset : int
        Of the first pixel value (of all frames).
    n_bytes : int or None
        Declared length of the pixel values of all frames; None where they are encapsulated.
    transfer_syntax : str
        UID.
    rows, columns, samples, bits_allocated, bits_stored, high_bit : int
        As stated; 0 where absent.
    is_signed : bool
        Pixel representation 1.
    n_frames, frame : int
        Frames in the file, and index of this one.
    """

    path: Path
    n_file_bytes: int
    header_digest: bytes
    offset: int
    n_bytes: int | None
    transfer_syntax: str
    rows: int
    columns: int
    samples: int
    bits_allocated: int
    bits_stored: int
    high_bit: int
    is_signed: bool
    n_frames: int = 1
    frame: int = 0

    @property
    def n_bytes_wanted(self) -> int:
        """Bytes that all frames need when they are not encapsulated."""
        return self.rows * self.columns * self.samples * (self.bits_allocated // 8) * self.n_frames


@dataclass(frozen=True, slots=True, kw_only=True)
class Scaling:
    """From stored values to true ones.

    Attributes
    ----------
    slope, intercept : float
        Rescale slope and intercept (0028,1053) and (0028,1052); 1 and 0 where absent.
    is_stated : bool
        Whether the file has them.
    precise_slope : float or None
        Philips' private scale slope (2005,xx0E): stored / (slope x precise slope) is on one scale
        for all images of an examination.
    real_world_slope : float or None
        (0040,9225), noted only.
    """

    slope: float = 1.0
    intercept: float = 0.0
    is_stated: bool = False
    precise_slope: float | None = None
    real_world_slope: float | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class ImageHeader:
    """The header of one image: a classic file, or one frame of an enhanced one.

    Attributes
    ----------
    pixels, scaling : StoredPixels, Scaling
        How to read its values.
    kind : str
        Magnitude, phase, ... (`liverfe.acquire.dicom.components`).
    image_type : tuple of str
        (0008,0008), or the frame type.
    sop_class, sop_instance, study_uid, series_uid, frame_of_reference : str
        Unique identifiers; empty where absent.
    series_number, acquisition_number, instance_number : int or None
        As stated; not relied on for order.
    temporal_position : int or None
        (0020,0100) or (0020,9128).
    time_s : float or None
        Acquisition time, seconds since midnight.
    echo_time_ms : float or None
        (0018,0081) or (0018,9082).
    echo_number, raw_run : int or None
        (0018,0086) and GE's (0019,xxA2): used only where a user gives the echo times.
    position_mm, orientation : tuple of float or None
        (0020,0032) and (0020,0037), LPS+.
    spacing_mm : tuple of float or None
        Distance between rows, between columns (0028,0030).
    slice_thickness_mm, slice_spacing_mm : float or None
        (0018,0050) and (0018,0088).
    scanning_sequence, sequence_variant : tuple of str
        (0018,0020) and (0018,0021), or what stands for them in an enhanced file.
    stated_field_t : float or None
        (0018,0087).
    is_lossy : bool
        (0028,2110) is 01.
    coil : str
        Siemens' coil string (0051,xx0F); empty elsewhere.
    acquisition, subject : Acquisition, Subject
        How and whom; the field strength is not yet settled.
    is_name_decodable : bool
        False where the patient's name does not fit the stated character set.
    """

    pixels: StoredPixels
    scaling: Scaling
    kind: Kind
    image_type: tuple[str, ...]
    sop_class: str
    sop_instance: str
    study_uid: str
    series_uid: str
    frame_of_reference: str
    series_number: int | None
    acquisition_number: int | None
    instance_number: int | None
    temporal_position: int | None
    time_s: float | None
    echo_time_ms: float | None
    echo_number: int | None
    raw_run: int | None
    position_mm: Vector | None
    orientation: tuple[float, ...] | None
    spacing_mm: tuple[float, float] | None
    slice_thickness_mm: float | None
    slice_spacing_mm: float | None
    scanning_sequence: tuple[str, ...]
    sequence_variant: tuple[str, ...]
    stated_field_t: float | None
    is_lossy: bool
    coil: str
    acquisition: Acquisition
    subject: Subject
    is_name_decodable: bool = True

    @property
    def path(self) -> Path:
        """The file."""
        return self.pixels.path

    @property
    def series(self) -> str:
        """The series as a message names it."""
        if self.series_number is not None:
            return f"series {self.series_number}"
        return f"series ...{self.series_uid[-6:]}" if self.series_uid else "a series without number"

    @property
    def person(self) -> tuple[str, str]:
        """What must not show in a message: the patient's name and number."""
        return self.subject.patient_name, self.subject.patient_id
