"""Headers of the phantom's classic MR images: invented, and saying so."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from pydicom.dataset import Dataset, FileMetaDataset
from pydicom.uid import UID, MRImageStorage

from liverfe import __version__
from liverfe.phantom.make import Phantom

__all__ = ["PATIENT_ID", "PATIENT_NAME", "Frame", "describe_frame", "describe_study"]

PATIENT_NAME = "SYNTHETIC^PHANTOM"
PATIENT_ID = "SYN-0001"
_IMAGE_COMMENTS = "SYNTHETIC image of a computed phantom: shows no person. Not for diagnosis."

_PHASE_BITS = 12
PHASE_COUNTS = 2**_PHASE_BITS
"""Phase is stored as 0..4095 for -pi up to (not including) pi."""

_LPS_FROM_RAS = np.array([-1.0, -1.0, 1.0])
"""DICOM counts towards the patient's left and back, the grid towards right and front."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Frame:
    """One image to write: which numbers, and what the file shall say of itself.

    Attributes
    ----------
    component : str
        ``M`` magnitude or ``P`` phase.
    run, echo, slice_index : int
        Counted from 0.
    series : int
        Series number, from 1.
    instance : int
        Instance number within the series, from 1.
    """

    component: str
    run: int
    echo: int
    slice_index: int
    series: int
    instance: int


def describe_study(phantom: Phantom, *, layout: str, transfer_syntax: UID) -> Dataset:
    """Fill what all images of the study share.

    Parameters
    ----------
    phantom : Phantom
        For recipe, grid and UIDs.
    layout : str
        Goes into every UID: the same object in two layouts is two studies.
    transfer_syntax : UID
        Of the files.

    Returns
    -------
    Dataset
        With file meta information; `describe_frame` fills the rest.
    """
    dataset = Dataset()
    dataset.file_meta = FileMetaDataset()
    fill(
        dataset.file_meta, MediaStorageSOPClassUID=MRImageStorage, TransferSyntaxUID=transfer_syntax
    )
    _describe_patient_and_study(dataset, phantom, layout)
    _describe_equipment(dataset, phantom)
    _describe_sequence(dataset, phantom)
    _describe_plane(dataset, phantom)
    _describe_pixels(dataset, phantom)
    return dataset


def _describe_patient_and_study(dataset: Dataset, phantom: Phantom, layout: str) -> None:
    day = phantom.recipe.study_date.strftime("%Y%m%d")
    fill(
        dataset,
        SpecificCharacterSet="ISO_IR 192",
        SOPClassUID=MRImageStorage,
        StudyDate=day,
        SeriesDate=day,
        AcquisitionDate=day,
        ContentDate=day,
        StudyTime="120000",
        SeriesTime="120000",
        ContentTime="120000",
        AccessionNumber="",
        Modality="MR",
        ReferringPhysicianName="",
        StudyDescription="SYNTHETIC multi-echo liver",
        PatientName=PATIENT_NAME,
        PatientID=PATIENT_ID,
        PatientBirthDate="",
        PatientSex="O",
        PatientComments="Synthetic: no person",
        BodyPartExamined="ABDOMEN",
        PatientPosition="HFS",
        StudyInstanceUID=phantom.uid(layout, "study"),
        FrameOfReferenceUID=phantom.uid(layout, "frame of reference"),
        PositionReferenceIndicator="",
        StudyID="SYN",
        ImageComments=_IMAGE_COMMENTS,
        QualityControlImage="YES",
        BurnedInAnnotation="NO",
        LossyImageCompression="00",
    )


def _describe_equipment(dataset: Dataset, phantom: Phantom) -> None:
    scanner = phantom.recipe.scanner
    fill(
        dataset,
        Manufacturer="liverfe phantom",
        ManufacturerModelName=phantom.recipe.name,
        DeviceSerialNumber="SYNTHETIC",
        SoftwareVersions=f"liverfe {__version__}",
    )
    if scanner.field_strength_t is not None:
        fill(dataset, MagneticFieldStrength=decimal(scanner.field_strength_t))
    if scanner.imaging_frequency_mhz is not None:
        fill(dataset, ImagingFrequency=decimal(scanner.imaging_frequency_mhz))


def _describe_sequence(dataset: Dataset, phantom: Phantom) -> None:
    recipe = phantom.recipe
    fill(
        dataset,
        ScanningSequence="GR",
        SequenceVariant="SP",
        ScanOptions="",
        MRAcquisitionType="2D",
        SequenceName="*phantom2d",
        ProtocolName=recipe.name,
        RepetitionTime=decimal(recipe.scanner.repetition_time_ms),
        FlipAngle=decimal(recipe.scanner.flip_angle_deg),
        NumberOfAverages="1",
        ImagedNucleus="1H",
        # One line of k-space per echo time and excitation, as in multi-echo gradient echo.
        EchoTrainLength=len(recipe.echo_times_ms),
        PercentSampling="100",
        PercentPhaseFieldOfView="100",
        InPlanePhaseEncodingDirection="COL",
        AcquisitionMatrix=[0, recipe.geometry.columns, recipe.geometry.rows, 0],
    )


def _describe_plane(dataset: Dataset, phantom: Phantom) -> None:
    grid, geometry = phantom.grid, phantom.recipe.geometry
    along_row, along_column = (
        grid.affine_mm[:3, axis] / grid.voxel_size_mm[axis] * _LPS_FROM_RAS for axis in (0, 1)
    )
    between_columns_mm, between_rows_mm = geometry.pixel_size_mm
    fill(
        dataset,
        ImageOrientationPatient=[decimal(v) for v in (*along_row, *along_column)],
        PixelSpacing=[decimal(between_rows_mm), decimal(between_columns_mm)],
        SliceThickness=decimal(geometry.slice_thickness_mm),
        SpacingBetweenSlices=decimal(geometry.slice_spacing_mm),
    )


def _describe_pixels(dataset: Dataset, phantom: Phantom) -> None:
    columns, rows = phantom.grid.shape[:2]
    fill(
        dataset,
        Columns=columns,
        Rows=rows,
        SamplesPerPixel=1,
        PhotometricInterpretation="MONOCHROME2",
        BitsAllocated=16,
        PixelRepresentation=0,
    )


def describe_frame(dataset: Dataset, phantom: Phantom, frame: Frame, *, layout: str) -> None:
    """Fill what belongs to one image, over what the last image left.

    Parameters
    ----------
    dataset : Dataset
        From `describe_study`; changed in place.
    phantom : Phantom
        The scan that the image comes from.
    frame : Frame
        Which image.
    layout : str
        As for `describe_study`.
    """
    is_phase = frame.component == "P"
    image = (frame.component, frame.run, frame.echo, frame.slice_index)
    sop_uid = phantom.uid(layout, "image", *image)
    position_mm = phantom.grid.to_mm([0.0, 0.0, float(frame.slice_index)])
    bits = _PHASE_BITS if is_phase else phantom.recipe.storage.bits
    fill(dataset.file_meta, MediaStorageSOPInstanceUID=sop_uid)
    fill(
        dataset,
        SOPInstanceUID=sop_uid,
        SeriesInstanceUID=phantom.uid(layout, "series", frame.series),
        SeriesNumber=frame.series,
        SeriesDescription="SYNTHETIC multi-echo GRE",
        AcquisitionNumber=frame.run + 1,
        AcquisitionTime=f"12{frame.run:02d}00",
        InstanceNumber=frame.instance,
        EchoNumbers=frame.echo + 1,
        EchoTime=decimal(phantom.recipe.echo_times_ms[frame.echo]),
        ImageType=["ORIGINAL", "PRIMARY", frame.component, "ND"],
        ComplexImageComponent="PHASE" if is_phase else "MAGNITUDE",
        ImagePositionPatient=[decimal(v) for v in position_mm * _LPS_FROM_RAS],
        SliceLocation=decimal(float(position_mm @ phantom.grid.slice_normal)),
        BitsStored=bits,
        HighBit=bits - 1,
    )
    _describe_scale(dataset, phantom, frame)


def _describe_scale(dataset: Dataset, phantom: Phantom, frame: Frame) -> None:
    is_phase = frame.component == "P"
    slopes = phantom.recipe.storage.slope_per_echo
    # One window for all echoes of a component, so that the decay is seen.
    low, high = (-np.pi, np.pi) if is_phase else (0.0, float(np.max(phantom.s0)))
    fill(dataset, WindowCenter=decimal((low + high) / 2), WindowWidth=decimal(high - low))
    if is_phase or set(slopes) != {1.0}:
        slope = 2 * np.pi / PHASE_COUNTS if is_phase else slopes[frame.echo]
        fill(dataset, RescaleIntercept=decimal(low), RescaleSlope=decimal(slope), RescaleType="US")
        return
    for keyword in ("RescaleIntercept", "RescaleSlope", "RescaleType"):
        # The image before may have been a phase image.
        if keyword in dataset:
            del dataset[keyword]


def fill(dataset: Dataset, **values: object) -> None:
    """Set elements by their DICOM keywords.

    Parameters
    ----------
    dataset : Dataset
        Changed in place.
    **values : object
        Keyword and value of each element.
    """
    for keyword, value in values.items():
        setattr(dataset, keyword, value)


def decimal(value: float) -> str:
    """Write a number as a DICOM decimal string: at most 16 characters.

    Parameters
    ----------
    value : float
        Any finite number.

    Returns
    -------
    str
        The most digits that fit, without trailing zeros; never ``-0``.
    """
    for digits in range(15, 0, -1):
        text = f"{value:.{digits}g}"
        if len(text) <= 16:
            return "0" if float(text) == 0.0 else text
    raise AssertionError("a number of one digit fits 16 characters")  # pragma: no cover


def phase_counts(phase_rad: NDArray[np.float32]) -> NDArray[np.uint16]:
    """Round phase in [-pi, pi] to stored counts; pi wraps to -pi, which is the same angle.

    Parameters
    ----------
    phase_rad : ndarray of float32
        Phase in radians.

    Returns
    -------
    ndarray of uint16, same shape
        0 to 4095.
    """
    turns = (phase_rad.astype(np.float64) + np.pi) / (2 * np.pi)
    counts = np.rint(turns * PHASE_COUNTS).astype(np.int64) % PHASE_COUNTS
    return np.asarray(counts, dtype=np.uint16)
