"""`NiftiFile` and `VolumePart`: what a NIfTI header says, and one echo of it.

The header is read by nibabel; the values are read by us, since nibabel reads no further than it
must and so never meets the checksum at the end of a compressed file.
"""

from __future__ import annotations

import zlib
from dataclasses import dataclass
from pathlib import Path

import nibabel as nib
import numpy as np
from numpy.typing import NDArray

from liverfe.acquire.naming import shown_name
from liverfe.errors import Finding, StudyRefused

_N_HEADER = 4096
"""Bytes that hold any NIfTI-1 or NIfTI-2 header."""

_FIRST_VALUE = 352
"""No value of a NIfTI file lies before this byte: the header and its four extension bytes."""

_DEFLATE_LIMIT = 1100
"""No sound deflate stream packs tighter than 1032 to 1; a header that claims more is crafted."""

_METRES = {1: 1000.0, 2: 1.0, 3: 0.001, 0: 1.0}
"""Millimetres in a spatial unit of xyzt_units; 0, unknown, is taken as mm, as everyone does."""

_SAME_PLACE_MM = 0.5
"""qform and sform that differ by more place the voxels differently; quaternions round."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class NiftiFile:
    """What the header of a NIfTI file says.

    Attributes
    ----------
    path : Path
        The file.
    n_file_bytes : int
        Its size on disk.
    is_packed : bool
        Whether it is compressed by gzip.
    shape : tuple of int
        X, Y, Z and number of volumes.
    kind : str
        numpy type of the stored values, with byte order.
    offset : int
        Of the first value, in the unpacked file.
    slope, intercept : float
        True value = stored x slope + intercept.
    affine_mm : ndarray of float64, shape (4, 4)
        RAS+.
    is_placed : bool
        Whether qform or sform states the place.
    disagreement_mm : float
        How far qform and sform place the corners apart; 0 where not both are set.
    """

    path: Path
    n_file_bytes: int
    is_packed: bool
    shape: tuple[int, int, int, int]
    kind: str
    offset: int
    slope: float
    intercept: float
    affine_mm: NDArray[np.float64]
    is_placed: bool
    disagreement_mm: float

    @property
    def n_bytes_unpacked(self) -> int:
        """Size that the unpacked file must have at least."""
        n_values = self.shape[0] * self.shape[1] * self.shape[2] * self.shape[3]
        return self.offset + n_values * np.dtype(self.kind).itemsize

    @property
    def name(self) -> str:
        """The file as a message names it."""
        return shown_name(self.path)


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class VolumePart:
    """One echo: a volume of a NIfTI file, and the sidecars that speak of it."""

    file: NiftiFile
    volume: int
    sidecars: tuple[Path, ...] = ()


def read_nifti_header(path: Path, n_file_bytes: int) -> NiftiFile:
    """Read the header of a NIfTI file and hold it against the file's size.

    Parameters
    ----------
    path : Path
        A file that begins as NIfTI does, compressed or not.
    n_file_bytes : int
        Its size.

    Returns
    -------
    NiftiFile
        What it says.

    Raises
    ------
    StudyRefused
        With ``nifti-damaged`` or ``nifti-unsupported``.
    """
    with path.open("rb") as file:
        start = file.read(_N_HEADER)
    is_packed = start[:2] == b"\x1f\x8b"
    if is_packed:
        start = zlib.decompressobj(wbits=31).decompress(start, _N_HEADER)
    header = _parse(path, start)
    shape = _shape(path, header)
    kind = _kind(path, header)
    slope, intercept = header.get_slope_inter()
    affine, is_placed, disagreement = _place(header, shape)
    if abs(np.linalg.det(affine[:3, :3])) < 1e-9 or not np.isfinite(affine).all():
        raise _damaged(path, "its affine has no volume")
    found = NiftiFile(
        path=path,
        n_file_bytes=n_file_bytes,
        is_packed=is_packed,
        shape=shape,
        kind=kind,
        offset=int(header.get_data_offset()),
        slope=1.0 if slope is None else float(slope),
        intercept=0.0 if intercept is None else float(intercept),
        affine_mm=affine,
        is_placed=is_placed,
        disagreement_mm=disagreement,
    )
    _check_size(found)
    return found


def _parse(path: Path, start: bytes) -> nib.Nifti1Header:
    is_second = start[4:7] in (b"n+2", b"ni2")
    if start[344:347] == b"ni1" or start[4:7] == b"ni2":
        raise _unsupported(path, "it is a header without its values (.hdr and .img pair)")
    try:
        if is_second:
            return nib.Nifti2Header(start[:540], check=False)
        return nib.Nifti1Header(start[:348], check=False)
    except Exception as error:
        # nibabel raises several kinds for headers that make no sense.
        raise _damaged(path, f"its header cannot be read ({type(error).__name__})") from error


def _shape(path: Path, header: nib.Nifti1Header) -> tuple[int, int, int, int]:
    sizes = [int(size) for size in header.get_data_shape()]
    if len(sizes) == 5 and sizes[3] == 1:
        sizes = [*sizes[:3], sizes[4]]
    while len(sizes) > 4 and sizes[-1] == 1:
        sizes.pop()
    if len(sizes) not in (3, 4) or min(sizes) < 1:
        shown = " x ".join(map(str, sizes))
        raise _unsupported(path, f"its shape is {shown}, not X x Y x Z or X x Y x Z x echoes")
    x, y, z, n_volumes = [*sizes, 1][:4]
    return x, y, z, n_volumes


def _kind(path: Path, header: nib.Nifti1Header) -> str:
    try:
        kind = header.get_data_dtype()
    except Exception as error:
        # nibabel raises for type codes that it does not know.
        raise _unsupported(path, "its data type is not known") from error
    if kind.kind not in "iuf" or kind.itemsize > 8:
        raise _unsupported(path, f"its data type {kind} is not one real number a voxel")
    return str(kind.str)


def _place(
    header: nib.Nifti1Header, shape: tuple[int, int, int, int]
) -> tuple[NDArray[np.float64], bool, float]:
    """The sform if set, else the qform, else the voxel sizes alone."""
    to_mm = np.diag([_METRES.get(int(header["xyzt_units"]) & 7, 1.0)] * 3 + [1.0])
    sform = header.get_sform() if int(header["sform_code"]) > 0 else None
    qform = header.get_qform() if int(header["qform_code"]) > 0 else None
    if sform is not None:
        apart = 0.0
        if qform is not None:
            last = np.array(shape[:3]) - 1
            corners = np.array([[i, j, k, 1] for i in (0, 1) for j in (0, 1) for k in (0, 1)])
            corners[:, :3] *= last
            apart = float(np.abs(corners @ (sform - qform).T).max()) * float(to_mm[0, 0])
        return to_mm @ sform, True, apart if apart > _SAME_PLACE_MM else 0.0
    if qform is not None:
        return to_mm @ qform, True, 0.0
    return to_mm @ np.diag([*np.abs(header["pixdim"][1:4]), 1.0]), False, 0.0


def _check_size(file: NiftiFile) -> None:
    wanted = file.n_bytes_unpacked
    if file.offset < _FIRST_VALUE:
        raise _damaged(file.path, f"its values would begin inside its header, at {file.offset}")
    if not file.is_packed and file.n_file_bytes < wanted:
        raise _damaged(
            file.path, f"{file.n_file_bytes} bytes are there, its header asks for {wanted}"
        )
    if file.is_packed and wanted > _DEFLATE_LIMIT * file.n_file_bytes:
        raise _damaged(
            file.path,
            f"its header asks for {wanted} bytes, more than {file.n_file_bytes} packed bytes hold",
        )


def _damaged(path: Path, reason: str) -> StudyRefused:
    return StudyRefused(Finding.of("nifti-damaged", file=shown_name(path), reason=reason))


def _unsupported(path: Path, reason: str) -> StudyRefused:
    return StudyRefused(Finding.of("nifti-unsupported", file=shown_name(path), reason=reason))
