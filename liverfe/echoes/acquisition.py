"""How a stack was acquired, and of whom."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date


@dataclass(frozen=True, slots=True, kw_only=True)
class Acquisition:
    """What the files say about how the images were made. None means: the files do not say.

    Attributes
    ----------
    field_strength_t : float or None
        The settled field strength (`settle_field_strength`); the key to the calibration curve.
    imaging_frequency_mhz : float or None
        Proton imaging frequency, DICOM (0018,0084).
    scanner : str
        Maker and model, for the report; empty if unknown.
    sequence : str
        Sequence name or type as the file states it; empty if unknown.
    repetition_time_ms, flip_angle_deg : float or None
        DICOM (0018,0080) and (0018,1314).
    acquired_matrix : tuple of int or None
        Acquired columns and rows (0018,1310); fewer than the image's means interpolation.
    contrast_agent : str
        Contrast bolus agent (0018,0010); empty if none is stated.
    is_synthetic : bool
        True where the files say that they come from a phantom recipe.
    """

    field_strength_t: float | None = None
    imaging_frequency_mhz: float | None = None
    scanner: str = ""
    sequence: str = ""
    repetition_time_ms: float | None = None
    flip_angle_deg: float | None = None
    acquired_matrix: tuple[int, int] | None = None
    contrast_agent: str = ""
    is_synthetic: bool = False


@dataclass(frozen=True, slots=True, kw_only=True)
class Subject:
    """Whose study it is: only the report and DICOM objects may show it, and only on request.

    Attributes
    ----------
    patient_name, patient_id : str
        As in the files, decoded; empty if absent.
    birth_date, study_date : date or None
        Patient's birth date and date of the study.
    sex : str
        DICOM (0010,0040): M, F, O or empty.
    study_uid : str
        Study Instance UID, or what stands for it (the path, for NIfTI): the input of the study key.
    series_description : str
        Of the series that the stack came from.
    """

    patient_name: str = ""
    patient_id: str = ""
    birth_date: date | None = None
    study_date: date | None = None
    sex: str = ""
    study_uid: str = ""
    series_description: str = ""


@dataclass(frozen=True, slots=True, kw_only=True)
class LeftOut:
    """Files that were read and not used.

    Attributes
    ----------
    what : str
        What they are, for example ``phase images of series 3``; never a patient's name.
    n_files : int
        How many.
    why : str
        The reason.
    """

    what: str
    n_files: int
    why: str
