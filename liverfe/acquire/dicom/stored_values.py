"""The bytes of one file -> the stored values of its frames, checked against what it declares.

Values that lie as they are (native transfer syntaxes) are viewed without a copy; compressed ones
are decoded by pydicom with the decoders that are installed.
"""

from __future__ import annotations

import io
import warnings
from typing import Any

import numpy as np
from numpy.typing import NDArray
from pydicom import dcmread
from pydicom.pixels import pixel_array

from liverfe.acquire.dicom.header import ImageHeader, StoredPixels
from liverfe.acquire.dicom.header_checks import NATIVE_SYNTAXES, name_of
from liverfe.acquire.dicom.reading import header_digest
from liverfe.errors import Finding, StudyRefused

_BIG_ENDIAN = "1.2.840.10008.1.2.2"


def check_unchanged(image: ImageHeader, data: bytes) -> None:
    """Refuse a file that changed since its header was read.

    Raises
    ------
    StudyRefused
        With ``file-changed``.
    """
    pixels = image.pixels
    is_same = (
        len(data) == pixels.n_file_bytes
        and header_digest(data, pixels.offset) == pixels.header_digest
    )
    if not is_same:
        raise StudyRefused(Finding.of("file-changed", file=name_of(image)))


def stored_frames(image: ImageHeader, data: bytes) -> NDArray[Any]:
    """Read the stored values of all frames of a file.

    Parameters
    ----------
    image : ImageHeader
        Header of any of its frames.
    data : bytes
        The whole file.

    Returns
    -------
    ndarray of integer, shape (F, rows, columns)
        Stored values; no rescale applied.

    Raises
    ------
    StudyRefused
        If the values are cut off, cannot be decoded or break their declared bits.
    """
    pixels = image.pixels
    if pixels.transfer_syntax in NATIVE_SYNTAXES:
        frames = _native(image, data)
    else:
        frames = _decoded(image, data)
    if frames.shape != (pixels.n_frames, pixels.rows, pixels.columns):
        raise StudyRefused(
            Finding.of(
                "pixels-unreadable",
                file=name_of(image),
                reason=f"decoded to {frames.shape}, not to what the header states",
            )
        )
    return frames


def check_bits(image: ImageHeader, stored: NDArray[Any]) -> None:
    """Refuse values that do not fit the declared number of bits.

    Raises
    ------
    StudyRefused
        With ``values-outside-bits``.
    """
    pixels = image.pixels
    low, high = bit_range(pixels)
    if pixels.bits_stored == pixels.bits_allocated:
        return
    lowest = int(stored.min()) if pixels.is_signed else 0
    highest = int(stored.max())
    if lowest < low or highest > high:
        raise StudyRefused(
            Finding.of(
                "values-outside-bits",
                file=name_of(image),
                value=highest if highest > high else lowest,
                bits=pixels.bits_stored,
            )
        )


def bit_range(pixels: StoredPixels) -> tuple[int, int]:
    """Lowest and highest value that the declared bits can hold."""
    if pixels.is_signed:
        return -(1 << (pixels.bits_stored - 1)), (1 << (pixels.bits_stored - 1)) - 1
    return 0, (1 << pixels.bits_stored) - 1


def _native(image: ImageHeader, data: bytes) -> NDArray[Any]:
    pixels = image.pixels
    n_there = len(data) - pixels.offset
    if n_there < pixels.n_bytes_wanted:
        raise StudyRefused(
            Finding.of(
                "pixel-data-truncated",
                file=name_of(image),
                n_there=max(0, n_there),
                n_wanted=pixels.n_bytes_wanted,
            )
        )
    order = ">" if pixels.transfer_syntax == _BIG_ENDIAN else "<"
    kind = f"{order}{'i' if pixels.is_signed else 'u'}{pixels.bits_allocated // 8}"
    n_values = pixels.n_frames * pixels.rows * pixels.columns
    values = np.frombuffer(data, dtype=kind, count=n_values, offset=pixels.offset)
    return values.reshape(pixels.n_frames, pixels.rows, pixels.columns)


def _decoded(image: ImageHeader, data: bytes) -> NDArray[Any]:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        try:
            values = pixel_array(dcmread(io.BytesIO(data)), raw=True)
        except Exception as error:
            # Decoders raise many kinds; whichever it is, no value can be trusted.
            raise StudyRefused(
                Finding.of("pixels-unreadable", file=name_of(image), reason=type(error).__name__)
            ) from error
    return values[np.newaxis] if values.ndim == 2 else values
