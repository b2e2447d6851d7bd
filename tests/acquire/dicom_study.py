"""Synthetic DICOM studies written with pydicom alone: the truth that reading is held against.

The object is a decay of known stored values on an oblique, unevenly named, shuffled set of files.
"""

from __future__ import annotations

import random
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from pydicom.dataset import Dataset, FileMetaDataset
from pydicom.uid import ExplicitVRLittleEndian

MR_IMAGE = "1.2.840.10008.5.1.4.1.1.4"
ROOT = "1.2.826.0.1.3680043.8.498.77"
"""A root that is free for examples."""

ECHO_TIMES_MS = (1.1, 2.3, 3.5, 4.7)
N_SLICES, ROWS, COLUMNS = 5, 24, 32
ROW_MM, COLUMN_MM, GAP_MM = 2.5, 2.0, 7.5

_TILT = np.deg2rad(15.0)
ROW_DIRECTION = np.array([np.cos(_TILT), np.sin(_TILT), 0.0])
COLUMN_DIRECTION = np.array([-np.sin(_TILT), np.cos(_TILT), 0.0])
NORMAL = np.cross(ROW_DIRECTION, COLUMN_DIRECTION)
CORNER_MM = np.array([-30.0, -20.0, 12.5])
"""Of slice 0, LPS+."""

Change = Callable[[Dataset, int, int], Any]
"""Gets data set, echo and slice; may change it; returns False to leave the file out."""


def stored_object(seed: int = 3) -> NDArray[np.uint16]:
    """Stored values, shape (E, Z, rows, columns): no symmetry, so that no flip goes unseen."""
    rng = np.random.default_rng(seed)
    s0 = rng.integers(500, 1500, (N_SLICES, ROWS, COLUMNS)).astype(np.float64)
    s0[:, :3, :5] *= 2.0
    rate = rng.uniform(20.0, 150.0, (N_SLICES, ROWS, COLUMNS))
    times_s = np.array(ECHO_TIMES_MS)[:, None, None, None] / 1000.0
    return np.rint(s0 * np.exp(-rate * times_s)).astype(np.uint16)


def expected_affine() -> NDArray[np.float64]:
    """RAS+ affine of (column, row, slice), by the definition in DICOM PS3.3 C.7.6.2.1.1."""
    affine = np.eye(4)
    affine[:3, 0] = ROW_DIRECTION * COLUMN_MM
    affine[:3, 1] = COLUMN_DIRECTION * ROW_MM
    affine[:3, 2] = NORMAL * GAP_MM
    affine[:3, 3] = CORNER_MM
    return np.diag([-1.0, -1.0, 1.0, 1.0]) @ affine


def expected_magnitude(stored: NDArray[Any]) -> NDArray[np.float32]:
    """The stack that a reader must give: (X, Y, Z, E)."""
    return np.asarray(stored.transpose(3, 2, 1, 0), dtype=np.float32)


def image(
    values: NDArray[Any],
    echo: int,
    k: int,
    *,
    series: int = 4,
    study: str = f"{ROOT}.1",
    run: int = 1,
) -> Dataset:
    """One classic MR image."""
    dataset = Dataset()
    uid = f"{study}.{series}.{run}.{echo + 1}.{k + 1}"
    meta = FileMetaDataset()
    meta.TransferSyntaxUID = ExplicitVRLittleEndian
    meta.MediaStorageSOPClassUID = MR_IMAGE
    meta.MediaStorageSOPInstanceUID = uid
    dataset.file_meta = meta
    dataset.SOPClassUID = MR_IMAGE
    dataset.SOPInstanceUID = uid
    dataset.StudyInstanceUID = study
    dataset.SeriesInstanceUID = f"{study}.{series}"
    dataset.FrameOfReferenceUID = f"{study}.99"
    dataset.ImageType = ["ORIGINAL", "PRIMARY", "M", "ND"]
    dataset.StudyDate = "20310402"
    dataset.AcquisitionTime = f"1015{run:02d}.{echo:02d}{k:02d}"
    dataset.Modality = "MR"
    dataset.Manufacturer = "Invented Works"
    dataset.ManufacturerModelName = "Model One"
    dataset.PatientName = "Quixley^Zelda"
    dataset.PatientID = "SYN-77123"
    dataset.PatientSex = "F"
    dataset.ScanningSequence = "GR"
    dataset.SequenceVariant = "SP"
    dataset.SequenceName = "me3d1"
    dataset.RepetitionTime = 12.5
    dataset.FlipAngle = 5
    dataset.EchoTime = ECHO_TIMES_MS[echo]
    dataset.MagneticFieldStrength = 1.5
    dataset.ImagingFrequency = 63.87
    dataset.AcquisitionMatrix = [0, COLUMNS, ROWS, 0]
    dataset.SeriesNumber = series
    dataset.AcquisitionNumber = run
    dataset.InstanceNumber = 1
    place = CORNER_MM + k * GAP_MM * NORMAL
    dataset.ImagePositionPatient = [f"{value:.6f}" for value in place]
    axes = (*ROW_DIRECTION, *COLUMN_DIRECTION)
    dataset.ImageOrientationPatient = [f"{value:.9f}" for value in axes]
    dataset.PixelSpacing = [ROW_MM, COLUMN_MM]
    dataset.SliceThickness = 6
    dataset.SpacingBetweenSlices = GAP_MM
    dataset.SamplesPerPixel = 1
    dataset.PhotometricInterpretation = "MONOCHROME2"
    dataset.Rows, dataset.Columns = values.shape
    dataset.BitsAllocated, dataset.BitsStored, dataset.HighBit = 16, 12, 11
    dataset.PixelRepresentation = 0
    dataset.PixelData = np.asarray(values, dtype="<u2").tobytes()
    return dataset


def write_study(
    folder: Path,
    stored: NDArray[Any] | None = None,
    *,
    change: Change | None = None,
    series_of_echo: Callable[[int], int] = lambda echo: 4,
    run: int = 1,
    seed: int = 5,
    prefix: str = "im",
) -> Path:
    """Write a study as classic images under names that say nothing of their order.

    Parameters
    ----------
    folder : Path
        Made if it is not there.
    stored : ndarray, optional
        Shape (E, Z, rows, columns).
    change : callable, optional
        Applied to each image.
    series_of_echo : callable
        Series number of an echo.
    run : int
        Acquisition number.
    seed : int
        Of the shuffled names.
    prefix : str
        Of the names.

    Returns
    -------
    Path
        The folder.
    """
    folder.mkdir(parents=True, exist_ok=True)
    values = stored_object() if stored is None else stored
    names = list(range(values.shape[0] * values.shape[1]))
    random.Random(seed).shuffle(names)
    for echo in range(values.shape[0]):
        for k in range(values.shape[1]):
            name = names.pop()
            dataset = image(values[echo, k], echo, k, series=series_of_echo(echo), run=run)
            if change is not None and change(dataset, echo, k) is False:
                continue
            save(dataset, folder / f"{prefix}{name:03d}")
    return folder


def save(dataset: Dataset, path: Path) -> None:
    """Save with preamble, in the transfer syntax that the file's meta information states."""
    dataset.save_as(path, enforce_file_format=True)


Edit = Callable[[Dataset], None]


def always(edit: Edit) -> Change:
    return lambda dataset, echo, k: edit(dataset)


def in_one_image(edit: Edit, echo: int = 1, k: int = 2) -> Change:
    return lambda dataset, e, s: edit(dataset) if (e, s) == (echo, k) else None


def without(echo: int, k: int) -> Change:
    return lambda dataset, e, s: (e, s) != (echo, k)


def put(**values: Any) -> Edit:
    def edit(dataset: Dataset) -> None:
        for keyword, value in values.items():
            setattr(dataset, keyword, value)

    return edit


def drop(*keywords: str) -> Edit:
    def edit(dataset: Dataset) -> None:
        for keyword in keywords:
            delattr(dataset, keyword)

    return edit
