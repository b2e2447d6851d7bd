"""One DICOM file's bytes -> the headers of its images.

`pydicom` is silent about a header that is cut off (it gives an empty data set) and about pixel
data shorter than declared; both are looked for here.
"""

from __future__ import annotations

import hashlib
import io
import struct
import warnings
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pydicom.config import IGNORE
from pydicom.filereader import read_partial
from pydicom.uid import UID, DeflatedExplicitVRLittleEndian

from liverfe.acquire.dicom import tags
from liverfe.acquire.dicom.classic import classic_header
from liverfe.acquire.dicom.elements import Elements, text, whole
from liverfe.acquire.dicom.enhanced import enhanced_headers
from liverfe.acquire.dicom.header import ImageHeader, StoredPixels

MR_IMAGE = "1.2.840.10008.5.1.4.1.1.4"
ENHANCED_MR_IMAGE = "1.2.840.10008.5.1.4.1.1.4.1"
LEGACY_ENHANCED_MR_IMAGE = "1.2.840.10008.5.1.4.1.1.4.4"

_PIXEL_DATA = frozenset({0x7FE00008, 0x7FE00009, 0x7FE00010})
"""Float, double and integer pixel data: where a header ends."""

_WANTED: list[Any] = list(tags.TOP_LEVEL)

_N_FIRST_READ = 256 * 1024
"""Most headers end well before; a longer one is read a second time, whole."""

_N_LARGEST_HEADER = 256 * 1024 * 1024
"""A header beyond this is no header: the file is not read on."""


def uid_name(uid: str) -> str:
    """Name a UID for a message; one that the standard does not know is named as such."""
    named = UID(uid, validation_mode=IGNORE).name
    return named if named != uid else "unknown DICOM"


class NotReadable(Exception):
    """A file cannot be read as an image; its text is the reason, for what was left out."""


class NoImage(Exception):
    """A sound DICOM file that is no MR image; its text says what it is."""


def read_headers(path: Path, n_file_bytes: int) -> list[ImageHeader]:
    """Read the headers of all images of a DICOM file, without its pixels.

    Parameters
    ----------
    path : Path
        A file that begins as DICOM does.
    n_file_bytes : int
        Its size.

    Returns
    -------
    list of ImageHeader
        One for a classic file, one a frame for an enhanced one.

    Raises
    ------
    NotReadable
        If the file is damaged or needs what we do not read.
    NoImage
        If it is another DICOM object.
    """
    with warnings.catch_warnings():
        # Malformed values are judged where they are used, not announced on the screen.
        warnings.simplefilter("ignore")
        try:
            return _read_headers(path, n_file_bytes)
        except (NotReadable, NoImage, OSError):
            raise
        except Exception as error:
            # pydicom raises many kinds for a header that makes no sense; all mean the same here.
            raise NotReadable(f"its header cannot be read ({type(error).__name__})") from error


def _read_headers(path: Path, n_file_bytes: int) -> list[ImageHeader]:
    with path.open("rb") as file:
        start = file.read(_N_FIRST_READ)
        if b"1.2.840.10008.1.2.1.99" in start[:1024]:
            raise NotReadable(
                f"its transfer syntax is {uid_name(DeflatedExplicitVRLittleEndian)}, which can "
                "hide any size; export it as Explicit VR Little Endian"
            )
        parsed = _parse(start)
        if parsed.offset is None and len(start) < min(n_file_bytes, _N_LARGEST_HEADER):
            start += file.read(_N_LARGEST_HEADER)
            parsed = _parse(start)
    sop_class = text(parsed.elements, tags.SOP_CLASS)
    if not sop_class:
        raise NotReadable("its header is cut off: nothing could be read from it")
    if sop_class not in (MR_IMAGE, ENHANCED_MR_IMAGE, LEGACY_ENHANCED_MR_IMAGE):
        raise NoImage(uid_name(sop_class))
    if parsed.offset is None:
        raise NotReadable("it ends before its pixel data (7FE0,0010)")
    pixels = _stored_pixels(parsed, path, n_file_bytes, start)
    if sop_class == MR_IMAGE:
        return [classic_header(parsed.elements, pixels)]
    return enhanced_headers(parsed.elements, pixels)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Parsed:
    """A header: its elements, how they are encoded, and where the pixel data element begins."""

    elements: Elements
    transfer_syntax: str
    is_little_endian: bool
    offset: int | None


def _parse(start: bytes) -> _Parsed:
    """Parse a header; the offset is None where the pixel data were not reached."""
    buffer = io.BytesIO(start)
    dataset = read_partial(buffer, stop_when=_is_pixel_data, specific_tags=_WANTED, force=True)
    offset = buffer.tell()
    is_reached = start[offset : offset + 4] in (b"\xe0\x7f\x10\x00", b"\x7f\xe0\x00\x10")
    is_implicit, is_little = dataset.original_encoding
    return _Parsed(
        elements=Elements(dataset),
        transfer_syntax=_transfer_syntax(dataset.file_meta, is_implicit, is_little),
        is_little_endian=is_little is not False,
        offset=offset if is_reached else None,
    )


def _is_pixel_data(tag: int, _vr: str | None, _length: int) -> bool:
    return tag in _PIXEL_DATA


def _stored_pixels(parsed: _Parsed, path: Path, n_file_bytes: int, start: bytes) -> StoredPixels:
    offset = parsed.offset
    assert offset is not None
    order = "<" if parsed.is_little_endian else ">"
    # Explicit VR: tag, VR, two reserved bytes, length; implicit VR: tag, length.
    is_explicit = start[offset + 4 : offset + 6] in (b"OW", b"OB")
    value_offset = offset + (12 if is_explicit else 8)
    (length,) = struct.unpack(order + "I", start[value_offset - 4 : value_offset])

    def stated(tag: int, default: int = 0) -> int:
        found = whole(parsed.elements, tag, binary="US")
        return default if found is None else found

    return StoredPixels(
        path=path,
        n_file_bytes=n_file_bytes,
        header_digest=header_digest(start, value_offset),
        offset=value_offset,
        n_bytes=None if length == 0xFFFFFFFF else length,
        transfer_syntax=parsed.transfer_syntax,
        rows=stated(tags.ROWS),
        columns=stated(tags.COLUMNS),
        samples=stated(tags.SAMPLES_PER_PIXEL, 1),
        bits_allocated=stated(tags.BITS_ALLOCATED),
        bits_stored=stated(tags.BITS_STORED),
        high_bit=stated(tags.HIGH_BIT),
        is_signed=stated(tags.PIXEL_REPRESENTATION) == 1,
        n_frames=max(1, whole(parsed.elements, tags.NUMBER_OF_FRAMES) or 1),
    )


def header_digest(data: bytes, offset: int) -> bytes:
    """Digest all bytes before the pixel values."""
    return hashlib.blake2b(memoryview(data)[:offset], digest_size=16).digest()


def _transfer_syntax(meta: Any, is_implicit: bool | None, is_little: bool | None) -> str:
    stated = str(meta.get("TransferSyntaxUID", "")) if meta is not None else ""
    if stated:
        return stated
    if is_little is False:
        return "1.2.840.10008.1.2.2"
    return "1.2.840.10008.1.2" if is_implicit is not False else "1.2.840.10008.1.2.1"
