"""The values of a NIfTI file, read to its last byte and hashed on the way."""

from __future__ import annotations

import gzip
import hashlib
import io
import zlib
from typing import Any

import numpy as np
from numpy.typing import NDArray

from liverfe.acquire.nifti.volume import NiftiFile
from liverfe.acquire.plan import InputFile
from liverfe.errors import Finding, StudyRefused

_MOST_TRAILING = 64 * 1024 * 1024
"""Bytes after the values that are read on to reach the checksum; more is a bomb."""

_CHUNK = 1 << 20


def read_values(file: NiftiFile) -> tuple[NDArray[Any], InputFile]:
    """Read the stored values of a NIfTI file.

    Parameters
    ----------
    file : NiftiFile
        Its header.

    Returns
    -------
    values : ndarray, shape (volumes, Z, Y, X)
        Stored values; no scale applied.
    source : InputFile
        Hash of the very bytes that were read.

    Raises
    ------
    StudyRefused
        With ``nifti-damaged`` where the file is shorter than its header says or its checksum
        does not fit, with ``file-changed`` where it changed.
    """
    data = file.path.read_bytes()
    if len(data) != file.n_file_bytes:
        raise StudyRefused(Finding.of("file-changed", file=file.name))
    source = InputFile(path=file.path, sha256=hashlib.sha256(data).hexdigest(), n_bytes=len(data))
    unpacked = _unpack(file, data) if file.is_packed else data
    if len(unpacked) < file.n_bytes_unpacked:
        raise _damaged(
            file, f"{len(unpacked)} bytes are there, its header asks for {file.n_bytes_unpacked}"
        )
    x, y, z, n_volumes = file.shape
    values = np.frombuffer(
        unpacked, dtype=file.kind, count=x * y * z * n_volumes, offset=file.offset
    )
    return values.reshape(n_volumes, z, y, x), source


def _unpack(file: NiftiFile, data: bytes) -> bytes:
    """Unpack the values, then read on to the end, where the checksum is compared."""
    try:
        with gzip.GzipFile(fileobj=io.BytesIO(data)) as stream:
            unpacked = stream.read(file.n_bytes_unpacked)
            n_trailing = 0
            while chunk := stream.read(_CHUNK):
                n_trailing += len(chunk)
                if n_trailing > _MOST_TRAILING:
                    raise _damaged(file, "it unpacks to far more than its header asks for")
    except (OSError, EOFError, zlib.error) as error:
        raise _damaged(
            file, f"its compressed data are broken or its checksum does not fit ({error})"
        ) from error
    return unpacked


def _damaged(file: NiftiFile, reason: str) -> StudyRefused:
    return StudyRefused(Finding.of("nifti-damaged", file=file.name, reason=reason))
