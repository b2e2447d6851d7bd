"""A classic single-frame MR image -> its `ImageHeader`."""

from __future__ import annotations

import warnings
from functools import lru_cache

from pydicom.charset import convert_encodings, decode_bytes

from liverfe.acquire.dicom import tags
from liverfe.acquire.dicom.components import image_kind
from liverfe.acquire.dicom.elements import (
    Elements,
    day,
    item,
    number,
    numbers,
    private,
    seconds_of_day,
    text,
    texts,
    whole,
)
from liverfe.acquire.dicom.header import ImageHeader, Scaling, StoredPixels, Vector
from liverfe.echoes import Acquisition, Subject

_NO_AGENT = frozenset({"", "NO", "NONE", "N", "N/A", "NA", "NOT GIVEN", "NIL"})
"""What scanners write into (0018,0010) when no agent was given."""


_FARTHEST_MM, _SMALLEST_MM = 10_000.0, 0.001
"""No scanner reaches farther and no pixel is smaller: what lies beyond is no place."""


def classic_header(elements: Elements, pixels: StoredPixels) -> ImageHeader:
    """Read the header of a classic MR image.

    Parameters
    ----------
    elements : Elements
        The header.
    pixels : StoredPixels
        Where its values lie.

    Returns
    -------
    ImageHeader
        What it says; nothing that it does not say is filled in.
    """
    image_type = texts(elements, tags.IMAGE_TYPE)
    subject, is_decodable = read_subject(elements)
    return ImageHeader(
        pixels=pixels,
        scaling=_scaling(elements),
        kind=image_kind(elements, image_type, text(elements, tags.COMPLEX_COMPONENT)),
        image_type=image_type,
        sop_class=text(elements, tags.SOP_CLASS),
        sop_instance=text(elements, tags.SOP_INSTANCE),
        study_uid=text(elements, tags.STUDY_UID),
        series_uid=text(elements, tags.SERIES_UID),
        frame_of_reference=text(elements, tags.FRAME_OF_REFERENCE),
        series_number=whole(elements, tags.SERIES_NUMBER),
        acquisition_number=whole(elements, tags.ACQUISITION_NUMBER),
        instance_number=whole(elements, tags.INSTANCE_NUMBER),
        temporal_position=whole(elements, tags.TEMPORAL_POSITION),
        time_s=seconds_of_day(
            text(elements, tags.ACQUISITION_TIME)
            or text(elements, tags.ACQUISITION_DATETIME)[8:].split("+")[0].split("-")[0]
        ),
        echo_time_ms=number(elements, tags.ECHO_TIME),
        echo_number=whole(elements, tags.ECHO_NUMBERS),
        raw_run=_raw_run(elements),
        position_mm=vector(elements),
        orientation=orientation(elements),
        spacing_mm=spacing(elements),
        slice_thickness_mm=number(elements, tags.SLICE_THICKNESS),
        slice_spacing_mm=number(elements, tags.SLICE_SPACING),
        scanning_sequence=tuple(t.upper() for t in texts(elements, tags.SCANNING_SEQUENCE)),
        sequence_variant=tuple(t.upper() for t in texts(elements, tags.SEQUENCE_VARIANT)),
        stated_field_t=number(elements, tags.FIELD_STRENGTH),
        is_lossy=text(elements, tags.LOSSY) == "01",
        coil=_coil(elements),
        acquisition=_acquisition(elements),
        subject=subject,
        is_name_decodable=is_decodable,
    )


def vector(elements: Elements) -> Vector | None:
    """Read (0020,0032) ImagePositionPatient, LPS+ mm."""
    found = numbers(elements, tags.POSITION)
    if len(found) != 3 or max(map(abs, found)) > _FARTHEST_MM:
        return None
    return found[0], found[1], found[2]


def orientation(elements: Elements) -> tuple[float, ...] | None:
    """Read (0020,0037) ImageOrientationPatient: six direction cosines, LPS+."""
    found = numbers(elements, tags.ORIENTATION)
    return found if len(found) == 6 else None


def spacing(elements: Elements) -> tuple[float, float] | None:
    """Read (0028,0030) PixelSpacing: between rows, between columns, mm."""
    found = numbers(elements, tags.PIXEL_SPACING)
    if len(found) != 2 or not _SMALLEST_MM < min(found) <= max(found) < _FARTHEST_MM:
        return None
    return found[0], found[1]


def precise_slope(elements: Elements) -> float | None:
    """Read Philips' private scale slope by its creator's block; None where absent or zero."""
    tag = private(elements, 0x2005, 0x0E, tags.PHILIPS)
    found = number(elements, tag, binary="FL") if tag is not None else None
    return found or None


def agent(elements: Elements) -> str:
    """Read the contrast agent; empty where none was given."""
    stated = text(elements, tags.CONTRAST_AGENT)
    return "" if stated.upper() in _NO_AGENT else stated


def is_synthetic(elements: Elements) -> bool:
    """Tell whether the file says of itself that it is synthetic."""
    told = (tags.MANUFACTURER, tags.MODEL, tags.PATIENT_COMMENTS, tags.SERIES_DESCRIPTION)
    return any("synthetic" in text(elements, tag).lower() for tag in told)


def scanner(elements: Elements) -> str:
    """Name maker and model, as the report shows them."""
    named = (text(elements, tags.MANUFACTURER), text(elements, tags.MODEL))
    return " ".join(part for part in named if part)


def _scaling(elements: Elements) -> Scaling:
    slope = number(elements, tags.RESCALE_SLOPE)
    intercept = number(elements, tags.RESCALE_INTERCEPT)
    mapping = item(elements, tags.REAL_WORLD_SEQUENCE)
    return Scaling(
        slope=1.0 if slope is None else slope,
        intercept=0.0 if intercept is None else intercept,
        is_stated=slope is not None,
        precise_slope=precise_slope(elements),
        real_world_slope=number(mapping, tags.REAL_WORLD_SLOPE, binary="FD") if mapping else None,
    )


def _raw_run(elements: Elements) -> int | None:
    tag = private(elements, 0x0019, 0xA2, tags.GE_ACQUISITION)
    return whole(elements, tag, binary="SL") if tag is not None else None


def _coil(elements: Elements) -> str:
    tag = private(elements, 0x0051, 0x0F, tags.SIEMENS_HEADER)
    return text(elements, tag) if tag is not None else ""


def _acquisition(elements: Elements) -> Acquisition:
    matrix = [int(size) for size in numbers(elements, tags.ACQUISITION_MATRIX, binary="US") if size]
    return Acquisition(
        imaging_frequency_mhz=number(elements, tags.IMAGING_FREQUENCY),
        scanner=scanner(elements),
        sequence=text(elements, tags.SEQUENCE_NAME) or text(elements, tags.PULSE_SEQUENCE_NAME),
        repetition_time_ms=number(elements, tags.REPETITION_TIME),
        flip_angle_deg=number(elements, tags.FLIP_ANGLE),
        acquired_matrix=(matrix[0], matrix[1]) if len(matrix) == 2 else None,
        contrast_agent=agent(elements),
        is_synthetic=is_synthetic(elements),
    )


def read_subject(elements: Elements) -> tuple[Subject, bool]:
    """Read whose study it is, and whether the name fits the stated character set."""
    raw = [elements.raw.get(tag) for tag in (tags.PATIENT_NAME, tags.PATIENT_ID)]
    encoded = [
        element.value if element is not None and isinstance(element.value, bytes) else b""
        for element in raw
    ]
    return _subject(
        encoded[0],
        encoded[1],
        texts(elements, tags.SPECIFIC_CHARACTER_SET),
        text(elements, tags.BIRTH_DATE),
        text(elements, tags.STUDY_DATE),
        text(elements, tags.SEX),
        text(elements, tags.STUDY_UID),
        text(elements, tags.SERIES_DESCRIPTION),
    )


@lru_cache(maxsize=64)
def _subject(
    name: bytes,
    patient_id: bytes,
    character_sets: tuple[str, ...],
    birth_date: str,
    study_date: str,
    sex: str,
    study_uid: str,
    series_description: str,
) -> tuple[Subject, bool]:
    shown_name, is_decodable = _decode(name, character_sets)
    shown_id, _ = _decode(patient_id, character_sets)
    subject = Subject(
        patient_name=shown_name,
        patient_id=shown_id,
        birth_date=day(birth_date),
        study_date=day(study_date),
        sex=sex if sex in ("M", "F", "O") else "",
        study_uid=study_uid,
        series_description=series_description,
    )
    return subject, is_decodable


def _decode(value: bytes, character_sets: tuple[str, ...]) -> tuple[str, bool]:
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        try:
            encodings = convert_encodings(list(character_sets) or [""])
            decoded = decode_bytes(value, encodings, {0x5C, 0x5E, 0x3D})
        except (LookupError, UnicodeError):
            return value.decode("latin-1").strip(" \0"), False
    return decoded.strip(" \0"), not caught
