"""What the headers of one stack say against it, before any pixel is read.

Each check gives findings; the order of `check_headers` is the order in which a reader should
learn of them, and the first `stop` is the refusal.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence

import numpy as np
from pydicom.config import IGNORE
from pydicom.pixels import get_decoder
from pydicom.uid import UID

from liverfe.acquire.dicom.candidates import Candidate
from liverfe.acquire.dicom.components import FILTERED, is_derived
from liverfe.acquire.dicom.geometry import is_plane
from liverfe.acquire.dicom.header import ImageHeader
from liverfe.acquire.dicom.reading import MR_IMAGE, uid_name
from liverfe.acquire.dicom.scaling import uses_precise_scaling
from liverfe.acquire.echo_times import check_echo_times
from liverfe.acquire.naming import shown_name
from liverfe.errors import Finding

NATIVE_SYNTAXES = frozenset({"1.2.840.10008.1.2", "1.2.840.10008.1.2.1", "1.2.840.10008.1.2.2"})
"""Implicit little, explicit little and explicit big endian: values lie as they are."""

_LOSSY_SYNTAXES = frozenset(
    {
        "1.2.840.10008.1.2.4.50",
        "1.2.840.10008.1.2.4.51",
        "1.2.840.10008.1.2.4.81",
        "1.2.840.10008.1.2.4.91",
        "1.2.840.10008.1.2.4.203",
    }
)
"""JPEG baseline and extended, JPEG-LS near-lossless, JPEG 2000, HTJ2K: may lose information."""

Findings = Iterator[Finding]


def check_headers(candidate: Candidate) -> list[Finding]:
    """Check the headers of one stack.

    Parameters
    ----------
    candidate : Candidate
        Its images.

    Returns
    -------
    list of Finding
        In the order in which they matter.
    """
    checks: tuple[Callable[[Candidate], Findings], ...] = (
        _sequence,
        _required,
        _statements,
        _repeats,
        _echo_times,
        _stored_pixels,
        _scaling,
        _doubts,
    )
    return [finding for check in checks for finding in check(candidate)]


def name_of(image: ImageHeader) -> str:
    """Name the file of an image for a message."""
    return shown_name(image.path, image.person)


def _sequence(candidate: Candidate) -> Findings:
    for image in candidate.images:
        stated = set(image.scanning_sequence)
        facts = {
            "series": image.series,
            "file": name_of(image),
            "sequence": "\\".join(image.scanning_sequence),
        }
        if "SE" in stated:
            yield Finding.of("spin-echo", **facts)
            return
        if "EP" in stated:
            yield Finding.of("echo-planar", **facts)
            return
    if not all(image.scanning_sequence for image in candidate.images):
        yield Finding.of("sequence-not-stated", series=candidate.first.series)


def _required(candidate: Candidate) -> Findings:
    """No echo time and no position is ever guessed."""
    wanted: tuple[tuple[str, str, Callable[[ImageHeader], object]], ...] = (
        ("echo-time-missing", "(0018,0081) EchoTime", lambda i: i.echo_time_ms is not None),
        ("position-missing", "(0020,0032) ImagePositionPatient", lambda i: i.position_mm),
        ("position-missing", "(0020,0037) ImageOrientationPatient", _has_plane),
        ("position-missing", "(0028,0030) PixelSpacing", lambda i: i.spacing_mm),
    )
    for code, tag, is_there in wanted:
        lacking = [image for image in candidate.images if not is_there(image)]
        if lacking:
            yield Finding.of(
                code,
                tag=tag,
                series=lacking[0].series,
                file=name_of(lacking[0]),
                n_lacking=len(lacking),
                n_images=len(candidate.images),
            )


def _has_plane(image: ImageHeader) -> bool:
    return image.orientation is not None and is_plane(image.orientation)


def _statements(candidate: Candidate) -> Findings:
    fields = {i.stated_field_t for i in candidate.images if i.stated_field_t is not None}
    if fields and max(fields) - min(fields) > 0.01:
        yield Finding.of(
            "field-differs",
            series=candidate.first.series,
            fields=" and ".join(f"{field:g} T" for field in sorted(fields)),
        )
    if not all(image.is_name_decodable for image in candidate.images):
        yield Finding.of("name-not-decodable", series=candidate.first.series)


def _repeats(candidate: Candidate) -> Findings:
    yield from candidate.findings


def _echo_times(candidate: Candidate) -> Findings:
    if not candidate.is_timed or any(f.level == "stop" for f in candidate.findings):
        return
    yield from check_echo_times(
        candidate.echo_times_ms,
        where=f"{candidate.first.series}, file {name_of(candidate.first)}",
        tag=(
            "(0018,0081) EchoTime"
            if candidate.first.sop_class == MR_IMAGE
            else "(0018,9082) EffectiveEchoTime of the functional groups"
        ),
    )


def _stored_pixels(candidate: Candidate) -> Findings:
    """Bytes and bits as declared; each kind of fault is reported once, with its first file."""
    reported: set[str] = set()
    for image in candidate.images:
        for finding in _pixel_faults(image):
            if finding.code not in reported:
                reported.add(finding.code)
                yield finding


def _pixel_faults(image: ImageHeader) -> Findings:
    pixels, file = image.pixels, name_of(image)
    is_whole_bytes = pixels.bits_allocated in (8, 16, 32)
    if (
        not is_whole_bytes
        or pixels.samples != 1
        or not 1 <= pixels.bits_stored <= pixels.bits_allocated
        or pixels.high_bit != pixels.bits_stored - 1
        or min(pixels.rows, pixels.columns) < 1
    ):
        yield Finding.of(
            "pixel-format-contradicts",
            file=file,
            stated=(
                f"{pixels.rows} rows x {pixels.columns} columns, {pixels.samples} sample(s), "
                f"{pixels.bits_allocated} bits allocated, {pixels.bits_stored} stored, high bit "
                f"{pixels.high_bit}"
            ),
        )
        return
    n_there = pixels.n_file_bytes - pixels.offset
    if pixels.transfer_syntax not in NATIVE_SYNTAXES:
        yield from _encoding(image)
    elif pixels.n_bytes is not None and not (
        pixels.n_bytes_wanted <= pixels.n_bytes <= pixels.n_bytes_wanted + 1
    ):
        yield Finding.of(
            "pixel-data-length", file=file, n_stated=pixels.n_bytes, n_wanted=pixels.n_bytes_wanted
        )
    elif n_there < pixels.n_bytes_wanted:
        yield Finding.of(
            "pixel-data-truncated", file=file, n_there=n_there, n_wanted=pixels.n_bytes_wanted
        )


def _encoding(image: ImageHeader) -> Findings:
    syntax = UID(image.pixels.transfer_syntax, validation_mode=IGNORE)
    try:
        is_decodable = syntax.type == "Transfer Syntax" and get_decoder(syntax).is_available
    except NotImplementedError:
        is_decodable = False
    if not is_decodable:
        yield Finding.of("no-decoder", file=name_of(image), syntax=uid_name(syntax))


def _scaling(candidate: Candidate) -> Findings:
    """Scales that differ between echoes change the decay; see also `scaling.settle_scaling`."""
    scales = {(image.scaling.slope, image.scaling.intercept) for image in candidate.images}
    if 0.0 in {slope for slope, _ in scales}:
        lacking = next(i for i in candidate.images if i.scaling.slope == 0.0)
        yield Finding.of("rescale-slope-zero", file=name_of(lacking))
    if len(scales) < 2:
        mapped = {image.scaling.real_world_slope for image in candidate.images}
        if len(mapped) > 1:
            yield Finding.of("real-world-map-differs", series=candidate.first.series)
    elif uses_precise_scaling(candidate.images):
        yield Finding.of("precise-scaling-used", series=candidate.first.series)
    elif _is_philips(candidate) and candidate.n_joined > 1:
        yield Finding.of("precise-scaling-missing", series=candidate.first.series)
    elif _differs_with_echo_time(candidate.images):
        yield Finding.of("rescale-differs", series=candidate.first.series)


def _is_philips(candidate: Candidate) -> bool:
    return "philips" in candidate.first.acquisition.scanner.lower()


def _differs_with_echo_time(images: Sequence[ImageHeader]) -> bool:
    """Whether slopes differ between echoes, or intercepts at all: slices may differ in slope."""
    if len({image.scaling.intercept for image in images}) > 1:
        return True
    by_echo: dict[float, list[float]] = {}
    for image in images:
        by_echo.setdefault(image.echo_time_ms or 0.0, []).append(image.scaling.slope)
    means = [float(np.mean(slopes)) for slopes in by_echo.values()]
    return bool(max(means) - min(means) > 1e-6 * max(means))


def _doubts(candidate: Candidate) -> Findings:
    images, series = candidate.images, candidate.first.series
    agents = sorted({i.acquisition.contrast_agent for i in images} - {""})
    if agents:
        yield Finding.of("contrast-agent", series=series)
    if any(i.is_lossy or i.pixels.transfer_syntax in _LOSSY_SYNTAXES for i in images):
        yield Finding.of("lossy-compression", series=series)
    if any(is_derived(image.image_type) for image in images):
        yield Finding.of("derived-images", series=series)
    if any(FILTERED & {token.upper() for token in image.image_type} for image in images):
        yield Finding.of("filtered-images", series=series)
    if any(image.kind == "unknown" for image in images):
        yield Finding.of("image-kind-not-stated", series=series)
