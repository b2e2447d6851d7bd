"""An enhanced (multi-frame) MR image -> one `ImageHeader` a frame, from its functional groups.

The echo time of a frame is sought where writers put it: MREchoSequence (0018,9082) of the frame,
then of all frames, then the unassigned converted attributes (0018,0081), then Philips' private
per-frame item (2005,140F), then the top level.
"""

from __future__ import annotations

from dataclasses import replace
from typing import TypeVar

from liverfe.acquire.dicom import classic, tags
from liverfe.acquire.dicom.components import image_kind
from liverfe.acquire.dicom.elements import (
    Elements,
    item,
    number,
    numbers,
    private,
    seconds_of_day,
    text,
    texts,
    whole,
)
from liverfe.acquire.dicom.header import ImageHeader, Scaling, StoredPixels

_Value = TypeVar("_Value", int, float)

_MOST_FRAMES = 20_000
"""A study has a few hundred; more is a crafted or broken count."""


def enhanced_headers(elements: Elements, pixels: StoredPixels) -> list[ImageHeader]:
    """Read the headers of all frames.

    Parameters
    ----------
    elements : Elements
        The header with its functional groups.
    pixels : StoredPixels
        Where the values of all frames lie.

    Returns
    -------
    list of ImageHeader
        One a frame. Where the functional groups are missing, one for the whole file without
        echo time and position, so that the refusal can name what is absent.
    """
    top = classic.classic_header(elements, pixels)
    shared = item(elements, tags.SHARED_GROUPS) or Elements()
    frames = elements.items_of(tags.PER_FRAME_GROUPS)
    if len(frames) != pixels.n_frames or len(frames) > _MOST_FRAMES:
        return [replace(top, position_mm=None, orientation=None, echo_time_ms=None)]
    constant = _constant(elements, shared, frames[0], top)
    return [
        _frame_header(elements, _Groups(frame, shared), constant, index)
        for index, frame in enumerate(frames)
    ]


class _Groups:
    """The functional groups of one frame: its own before those shared by all."""

    __slots__ = ("_frame", "_shared")

    def __init__(self, frame: Elements, shared: Elements) -> None:
        self._frame = frame
        self._shared = shared

    def find(self, tag: int) -> Elements:
        return item(self._frame, tag) or item(self._shared, tag) or Elements()

    def philips(self) -> Elements:
        for elements in (self._frame, self._shared):
            tag = private(elements, 0x2005, tags.PHILIPS_FRAME_GROUP, tags.PHILIPS_FRAME)
            if tag is not None and (found := item(elements, tag)) is not None:
                return found
        return Elements()


def _constant(
    elements: Elements, shared: Elements, frame: Elements, top: ImageHeader
) -> ImageHeader:
    """Fill in what the functional groups say of all frames: sequence, timing, matrix."""
    groups = _Groups(frame, shared)
    timing = groups.find(tags.TIMING_SEQUENCE)
    view = groups.find(tags.FOV_GEOMETRY_SEQUENCE)
    modifier = groups.find(tags.IMAGING_MODIFIER_SEQUENCE)
    columns = whole(view, tags.FREQUENCY_STEPS, binary="US")
    rows = whole(view, tags.PHASE_STEPS, binary="US")
    acquisition = replace(
        top.acquisition,
        imaging_frequency_mhz=number(modifier, tags.TRANSMITTER_FREQUENCY, binary="FD")
        or top.acquisition.imaging_frequency_mhz,
        repetition_time_ms=number(timing, tags.REPETITION_TIME)
        or top.acquisition.repetition_time_ms,
        flip_angle_deg=number(timing, tags.FLIP_ANGLE) or top.acquisition.flip_angle_deg,
        acquired_matrix=(columns, rows) if columns and rows else top.acquisition.acquired_matrix,
    )
    return replace(
        top, acquisition=acquisition, scanning_sequence=_scanning_sequence(elements, top)
    )


def _scanning_sequence(elements: Elements, top: ImageHeader) -> tuple[str, ...]:
    """Translate (0018,9008) and (0018,9018) to the words of (0018,0020)."""
    words = {"GRADIENT": ("GR",), "SPIN": ("SE",), "BOTH": ("GR", "SE")}
    found = words.get(text(elements, tags.ECHO_PULSE_SEQUENCE).upper(), top.scanning_sequence)
    is_planar = text(elements, tags.ECHO_PLANAR).upper() == "YES"
    return (*found, "EP") if is_planar and "EP" not in found else found


def _frame_header(
    elements: Elements, groups: _Groups, constant: ImageHeader, index: int
) -> ImageHeader:
    frame_type = groups.find(tags.MR_FRAME_TYPE_SEQUENCE)
    content = groups.find(tags.FRAME_CONTENT_SEQUENCE)
    measures = groups.find(tags.PIXEL_MEASURES_SEQUENCE)
    converted = groups.find(tags.UNASSIGNED_PER_FRAME_SEQUENCE)
    philips = groups.philips()
    image_type = texts(frame_type, tags.FRAME_TYPE) or constant.image_type
    component = text(frame_type, tags.COMPLEX_COMPONENT) or text(elements, tags.COMPLEX_COMPONENT)
    kind_of = converted if component == "" and len(converted) else philips
    return replace(
        constant,
        pixels=replace(constant.pixels, frame=index),
        scaling=_scaling(groups, philips, constant.scaling),
        kind=image_kind(kind_of, image_type, component),
        image_type=image_type,
        acquisition_number=_first(
            whole(content, tags.FRAME_ACQUISITION_NUMBER, binary="US"), constant.acquisition_number
        ),
        temporal_position=whole(content, tags.TEMPORAL_POSITION_INDEX, binary="UL"),
        time_s=_first(
            seconds_of_day(text(content, tags.FRAME_ACQUISITION_DATETIME)[8:].split("+")[0]),
            constant.time_s,
        ),
        echo_time_ms=_echo_time(groups, converted, philips, constant),
        echo_number=_first(whole(converted, tags.ECHO_NUMBERS), constant.echo_number),
        position_mm=classic.vector(groups.find(tags.PLANE_POSITION_SEQUENCE)),
        orientation=classic.orientation(groups.find(tags.PLANE_ORIENTATION_SEQUENCE)),
        spacing_mm=classic.spacing(measures) or constant.spacing_mm,
        slice_thickness_mm=_first(
            number(measures, tags.SLICE_THICKNESS), constant.slice_thickness_mm
        ),
        slice_spacing_mm=_first(number(measures, tags.SLICE_SPACING), constant.slice_spacing_mm),
    )


def _echo_time(
    groups: _Groups, converted: Elements, philips: Elements, constant: ImageHeader
) -> float | None:
    effective = numbers(groups.find(tags.ECHO_SEQUENCE), tags.EFFECTIVE_ECHO_TIME, binary="FD")
    return _first(
        effective[0] if effective else None,
        number(converted, tags.ECHO_TIME),
        number(philips, tags.ECHO_TIME),
        constant.echo_time_ms,
    )


def _scaling(groups: _Groups, philips: Elements, constant: Scaling) -> Scaling:
    transform = groups.find(tags.PIXEL_VALUE_SEQUENCE)
    mapping = groups.find(tags.REAL_WORLD_SEQUENCE)
    slope = _first(number(transform, tags.RESCALE_SLOPE), number(philips, tags.RESCALE_SLOPE))
    intercept = _first(
        number(transform, tags.RESCALE_INTERCEPT), number(philips, tags.RESCALE_INTERCEPT)
    )
    return Scaling(
        slope=constant.slope if slope is None else slope,
        intercept=constant.intercept if intercept is None else intercept,
        is_stated=slope is not None or constant.is_stated,
        precise_slope=classic.precise_slope(philips) or constant.precise_slope,
        real_world_slope=number(mapping, tags.REAL_WORLD_SLOPE, binary="FD"),
    )


def _first(*candidates: _Value | None) -> _Value | None:
    return next((found for found in candidates if found is not None), None)
