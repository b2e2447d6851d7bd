"""The phantom as NIfTI: one 4-D file, one file an echo, or a BIDS data set."""

from __future__ import annotations

import gzip
import json
from pathlib import Path
from typing import Any

import nibabel as nib
import numpy as np
from numpy.typing import NDArray

from liverfe import __version__
from liverfe.errors import UsageError
from liverfe.grid import Grid
from liverfe.phantom.make import Phantom
from liverfe.units import s_from_ms

__all__ = ["NIFTI_LAYOUTS", "save_volume", "write_bids", "write_json", "write_nifti"]

NIFTI_LAYOUTS: dict[str, str] = {
    "4d": "one 4-D file, echo last, with a sidecar that lists the echo times",
    "file-per-echo": "one file and sidecar an echo",
    "bids": "a BIDS data set with a MEGRE file an echo",
}
"""Layouts of a NIfTI study, and what they are."""

_GZIP_LEVEL = 1
"""Noise hardly shrinks: more effort costs time and gains nothing."""

_DESCRIPTION = b"SYNTHETIC liverfe phantom"
_SCANNER_SPACE = 1
_BIDS_VERSION = "1.11.1"
_BIDS_SUBJECT = "sub-synthetic01"


def write_nifti(phantom: Phantom, folder: Path, *, layout: str = "4d") -> list[Path]:
    """Write a phantom as NIfTI files.

    Parameters
    ----------
    phantom : Phantom
        What to write: its stored counts with their slopes.
    folder : Path
        Made if it is not there.
    layout : str
        A key of `NIFTI_LAYOUTS`.

    Returns
    -------
    list of Path
        The image files, by echo. Same phantom and layout, same bytes.

    Raises
    ------
    UsageError
        If the layout is unknown.
    """
    if layout not in NIFTI_LAYOUTS:
        raise UsageError(f"--layout {layout}: for NIfTI use one of {', '.join(NIFTI_LAYOUTS)}")
    if layout == "bids":
        return write_bids(phantom, folder)
    folder.mkdir(parents=True, exist_ok=True)
    if layout == "4d":
        path = folder / "multi-echo_magnitude.nii.gz"
        times_s = [s_from_ms(time) for time in phantom.recipe.echo_times_ms]
        _save_echoes(path, phantom)
        write_json(_sidecar_path(path), _sidecar(phantom) | {"EchoTime": _rounded(times_s)})
        return [path]
    return _write_echo_files(phantom, folder, "multi-echo_e{}_magnitude.nii.gz")


def write_bids(phantom: Phantom, folder: Path) -> list[Path]:
    """Write a phantom as a BIDS data set of one subject, with a MEGRE file an echo.

    Parameters
    ----------
    phantom : Phantom
        What to write.
    folder : Path
        Root of the data set; made if it is not there.

    Returns
    -------
    list of Path
        The image files, by echo.
    """
    anatomical = folder / _BIDS_SUBJECT / "anat"
    anatomical.mkdir(parents=True, exist_ok=True)
    description = {
        "Name": f"SYNTHETIC multi-echo liver: {phantom.recipe.name}",
        "BIDSVersion": _BIDS_VERSION,
        "DatasetType": "raw",
        "License": "CC0",
        "Authors": ["liverfe phantom"],
        "GeneratedBy": [{"Name": "liverfe phantom", "Version": __version__}],
    }
    write_json(folder / "dataset_description.json", description)
    readme = (
        f"# {phantom.recipe.title}\n\n{phantom.recipe.story}\n\n"
        "SYNTHETIC: computed from a recipe of liverfe; shows no person.\n"
    )
    (folder / "README.md").write_text(readme, encoding="utf-8", newline="\n")
    table = f"participant_id\tspecies\n{_BIDS_SUBJECT}\tn/a\n"
    (folder / "participants.tsv").write_text(table, encoding="utf-8", newline="\n")
    return _write_echo_files(phantom, anatomical, f"{_BIDS_SUBJECT}_echo-{{}}_MEGRE.nii.gz")


def _write_echo_files(phantom: Phantom, folder: Path, pattern: str) -> list[Path]:
    paths = []
    for e, time_ms in enumerate(phantom.recipe.echo_times_ms):
        path = folder / pattern.format(e + 1)
        slope = phantom.recipe.storage.slope_per_echo[e]
        save_volume(path, phantom.stored[..., e].astype(np.int16), phantom.grid, slope=slope)
        own = {"EchoTime": _rounded([s_from_ms(time_ms)])[0], "EchoNumber": e + 1}
        write_json(_sidecar_path(path), _sidecar(phantom) | own)
        paths.append(path)
    return paths


def _save_echoes(path: Path, phantom: Phantom) -> None:
    """Save all echoes in one file: whole numbers where one slope serves all, else floats."""
    slopes = phantom.recipe.storage.slope_per_echo
    if len(set(slopes)) == 1:
        save_volume(path, phantom.stored.astype(np.int16), phantom.grid, slope=slopes[0])
    else:
        save_volume(path, phantom.stored_signal(), phantom.grid)


def save_volume(path: Path, data: NDArray[Any], grid: Grid, *, slope: float = 1.0) -> None:
    """Save an array as gzipped NIfTI-1 whose bytes depend on the content alone.

    Parameters
    ----------
    path : Path
        Ends in ``.nii.gz``.
    data : ndarray, shape (X, Y, Z) or (X, Y, Z, E)
        Stored as it is, in its own data type.
    grid : Grid
        Gives both affines, as scanner coordinates.
    slope : float
        Written as ``scl_slope``: value = stored x slope.
    """
    image = nib.Nifti1Image(data, grid.affine_mm)
    image.header.set_xyzt_units("mm")
    image.header["descrip"] = _DESCRIPTION
    image.set_sform(grid.affine_mm, code=_SCANNER_SPACE)
    image.set_qform(grid.affine_mm, code=_SCANNER_SPACE)
    raw = bytearray(image.to_bytes())
    # nibabel would divide the data by a slope set in the header, so the field is filled after.
    header = nib.Nifti1Header(bytes(raw[: nib.Nifti1Header.sizeof_hdr]), check=False)
    header["scl_slope"], header["scl_inter"] = slope, 0.0
    raw[: len(header.binaryblock)] = header.binaryblock
    with path.open("wb") as file, _plain_gzip(file) as packed:
        packed.write(raw)


def _plain_gzip(file: Any) -> gzip.GzipFile:
    """Gzip without name and time in its header."""
    return gzip.GzipFile(filename="", fileobj=file, mode="wb", compresslevel=_GZIP_LEVEL, mtime=0)


def write_json(path: Path, document: dict[str, Any], *, indent: int | None = 1) -> None:
    """Write a JSON document with line feeds on every system.

    Parameters
    ----------
    path : Path
        The file.
    document : dict
        Without NaN or infinity.
    indent : int or None
        None writes one line: for long lists of points.
    """
    text = json.dumps(document, indent=indent, ensure_ascii=False, allow_nan=False)
    path.write_text(text + "\n", encoding="utf-8", newline="\n")


def _sidecar_path(image: Path) -> Path:
    return image.with_name(image.name.removesuffix(".nii.gz") + ".json")


def _rounded(times_s: list[float]) -> list[float]:
    """Drop digits that the division by 1000 made up: echo times are known to the nanosecond."""
    return [round(time, 9) for time in times_s]


def _sidecar(phantom: Phantom) -> dict[str, Any]:
    recipe = phantom.recipe
    scanner, geometry = recipe.scanner, recipe.geometry
    stated = {
        "MagneticFieldStrength": scanner.field_strength_t,
        "ImagingFrequency": scanner.imaging_frequency_mhz,
    }
    return {
        "Modality": "MR",
        "Manufacturer": "liverfe phantom",
        "ManufacturersModelName": recipe.name,
        "SoftwareVersions": f"liverfe {__version__}",
        "Synthetic": True,
        "ImageComments": "SYNTHETIC image of a computed phantom: shows no person.",
        "BodyPart": "LIVER",
        "ImageType": ["ORIGINAL", "PRIMARY", "M", "ND"],
        "ScanningSequence": "GR",
        "SequenceVariant": "SP",
        "MRAcquisitionType": "2D",
        "RepetitionTimeExcitation": round(s_from_ms(scanner.repetition_time_ms), 9),
        "FlipAngle": scanner.flip_angle_deg,
        "SliceThickness": geometry.slice_thickness_mm,
        "SpacingBetweenSlices": geometry.slice_spacing_mm,
        **{key: value for key, value in stated.items() if value is not None},
    }
