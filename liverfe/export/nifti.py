"""Maps as NIfTI with BIDS names, sidecars and label tables.

Each image gets a header of its own, float32 or uint8: a map saved with the header of its int16
source is scaled to it, and NaN (a voxel that was not measured) comes back as 0.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import nibabel as nib
import numpy as np
from isal import igzip
from numpy.typing import NDArray

from liverfe.export.bids import MAP_ENDINGS, bids_stem, map_sidecar, sidecar_bytes
from liverfe.export.csv_tables import safe_cell
from liverfe.export.output_file import OutputFile
from liverfe.grid import Grid
from liverfe.maps import VoxelStatus
from liverfe.study import StudyResult
from liverfe.units import s_from_ms
from liverfe.wording.export import STATUS_NAMES

__all__ = ["map_files", "nifti_gz_bytes"]

_SCANNER_SPACE = 1
"""NIFTI_XFORM_SCANNER_ANAT: the affine is the scanner's."""

_UNKNOWN_SPACE = 0

_SAME_PLACE_MM = 0.01
"""A qform that puts a corner this far off would be a second, wrong affine: it is switched off."""

_THREADS = 2
"""Compression frees the interpreter lock; more than two threads gain little on eight images."""


def map_files(result: StudyResult, document: Mapping[str, Any]) -> tuple[OutputFile, ...]:
    """Make all files of ``maps/``.

    Parameters
    ----------
    result : StudyResult
        Whose maps and regions to write.
    document : mapping
        Its document, from `result_document`: names, caution and method are taken from there.

    Returns
    -------
    tuple of OutputFile
        NIfTI images (``.nii.gz``), JSON sidecars and the tables of label images; empty where the
        study was refused or has no maps.
    """
    maps = result.maps
    if document["outcome"] != "reported" or maps is None:
        return ()
    images: dict[str, NDArray[Any]] = {
        "r2star": maps.r2star_per_s,
        "t2star": s_from_ms(maps.t2star_ms),
        "s0": maps.s0,
        "r2star_se": maps.r2star_se_per_s,
        "misfit": maps.reduced_chi2,
    }
    if result.lic_mg_per_g is not None:
        images["lic"] = result.lic_mg_per_g
    images = {kind: np.asarray(image, dtype=np.float32) for kind, image in images.items()}
    images["status"] = maps.status
    tables = {"status": _status_table()}
    if result.regions:
        images["rois"] = _paint_regions([region.summary.mask for region in result.regions])
        tables["rois"] = _region_table(document["regions"], images["rois"])

    start = f"maps/{bids_stem(document['study']['key'])}"
    with ThreadPoolExecutor(_THREADS) as threads:
        packed = list(threads.map(lambda image: nifti_gz_bytes(image, maps.grid), images.values()))
    files = []
    for kind, content in zip(images, packed, strict=True):
        path = f"{start}_{MAP_ENDINGS[kind]}"
        sidecar = sidecar_bytes(map_sidecar(kind, document))
        files.append(OutputFile(path=f"{path}.nii.gz", content=content))
        files.append(OutputFile(path=f"{path}.json", content=sidecar))
        if kind in tables:
            files.append(OutputFile(path=f"{path}.tsv", content=tables[kind]))
    return tuple(files)


def nifti_gz_bytes(image: NDArray[Any], grid: Grid) -> bytes:
    """Make a compressed NIfTI-1 image.

    Parameters
    ----------
    image : ndarray, shape (X, Y, Z)
        Values; the file keeps their type. NaN is kept.
    grid : Grid
        Where the voxels lie.

    Returns
    -------
    bytes
        The same image gives the same bytes on the same machine: no time, no file name.
    """
    nifti = nib.Nifti1Image(image, grid.affine_mm, dtype=image.dtype)
    nifti.set_sform(grid.affine_mm, code=_SCANNER_SPACE)
    nifti.set_qform(grid.affine_mm, code=_SCANNER_SPACE)
    if not Grid(shape=grid.shape, affine_mm=nifti.get_qform()).is_same_place_as(grid):
        nifti.set_qform(grid.affine_mm, code=_UNKNOWN_SPACE)
    nifti.header.set_xyzt_units(xyz="mm")
    # Level 1 of ISA-L packs these maps as small as zlib's best, in a tenth of its time.
    return bytes(igzip.compress(nifti.to_bytes(), compresslevel=1, mtime=0))


def _paint_regions(masks: list[NDArray[np.bool_]]) -> NDArray[np.integer[Any]]:
    """Paint regions 1, 2, ... into one image, the largest first: small ones stay visible."""
    labels = np.zeros(masks[0].shape, dtype=np.uint8 if len(masks) < 256 else np.uint16)
    sizes = [int(mask.sum()) for mask in masks]
    for i in sorted(range(len(masks)), key=lambda i: -sizes[i]):
        labels[masks[i]] = i + 1
    return labels


def _status_table() -> bytes:
    return _tsv(("index", "name"), ((int(s), STATUS_NAMES[s.name]) for s in VoxelStatus))


def _region_table(regions: list[Mapping[str, Any]], labels: NDArray[np.integer[Any]]) -> bytes:
    shown = np.bincount(labels.ravel(), minlength=len(regions) + 1)
    rows = (
        (i, region["name"], region["organ"], region["n_voxels"], int(shown[i]))
        for i, region in enumerate(regions, start=1)
    )
    return _tsv(("index", "name", "organ", "n_voxels", "n_voxels_shown"), rows)


def _tsv(columns: Iterable[str], rows: Iterable[Iterable[str | int]]) -> bytes:
    lines = ["\t".join(columns)]
    lines += ["\t".join(str(safe_cell(cell)) for cell in row) for row in rows]
    return ("\n".join(lines) + "\n").encode()
