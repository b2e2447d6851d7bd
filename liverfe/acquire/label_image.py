"""A NIfTI label image -> regions, each on the image's own grid."""

from __future__ import annotations

import csv
import json
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from liverfe.acquire.naming import shown_name
from liverfe.acquire.nifti.sidecar import name_parts
from liverfe.acquire.nifti.values import read_values
from liverfe.acquire.nifti.volume import read_nifti_header
from liverfe.errors import Finding, StudyRefused
from liverfe.grid import Grid
from liverfe.outlines import LabelMask, Region, organ_from_name

SOURCE = "label image"

_WHOLE_WITHIN = 1e-3
"""Labels saved through a scale factor come back as 2.9999999993; resampled ones as 2.4."""

_MOST_LABELS = 1000
"""An image with more distinct values is no label image."""


def read_label_image(path: Path) -> tuple[Region, ...]:
    """Read a label image: every value above zero is one region.

    Parameters
    ----------
    path : Path
        A NIfTI file, whole numbers or floats that are whole within 0.001.

    Returns
    -------
    tuple of Region
        Ordered by label; named by the ``.tsv`` (index, name) or ``.json`` (labels) beside the
        file, else ``label 1``, ``label 2``, ...

    Raises
    ------
    StudyRefused
        If the file is damaged, no label image, or holds no label.
    """
    file = read_nifti_header(path, path.stat().st_size)
    shown = shown_name(path)
    if file.shape[3] != 1:
        fourth = f"three axes are wanted, a fourth of {file.shape[3]} is there"
        raise _invalid(path, "shape", fourth)
    stored, _ = read_values(file)
    values = np.ascontiguousarray(stored[0].T)
    labels = _whole_labels(values, file.slope, file.intercept, shown)
    found = [int(label) for label in np.unique(labels) if label != 0]
    if not found:
        raise StudyRefused(Finding.of("region-empty", file=shown))
    if found[0] < 0 or len(found) > _MOST_LABELS:
        raise _invalid(path, "its values", "whole numbers from 0 to a few hundred are wanted")
    names = read_label_names(path)
    if file.disagreement_mm:
        apart = f"qform and sform place it {file.disagreement_mm:.1f} mm apart"
        raise _invalid(path, "its place in the patient", f"one place is wanted: {apart}")
    grid = Grid(shape=file.shape[:3], affine_mm=file.affine_mm)
    regions = []
    for label in found:
        name = names.get(label, f"label {label}")
        mask = LabelMask(mask=labels == label, grid=grid)
        regions.append(Region(name=name, organ=organ_from_name(name), shape=mask, source=SOURCE))
    return tuple(regions)


def _whole_labels(
    stored: NDArray[Any], slope: float, intercept: float, shown: str
) -> NDArray[np.int64]:
    if stored.dtype.kind in "iu" and slope == 1.0 and intercept == 0.0:
        return stored.astype(np.int64)
    values = stored.astype(np.float64) * slope + intercept
    if not np.isfinite(values).all():
        raise StudyRefused(Finding.of("region-labels-not-whole", file=shown, value="NaN"))
    whole = np.rint(values)
    off = np.abs(values - whole)
    if off.max() > _WHOLE_WITHIN:
        worst = float(values.flat[int(np.argmax(off))])
        raise StudyRefused(Finding.of("region-labels-not-whole", file=shown, value=f"{worst:.6g}"))
    return np.asarray(whole, dtype=np.int64)


def read_label_names(path: Path) -> dict[int, str]:
    """Read the names of labels from the table or JSON document beside a label image.

    Parameters
    ----------
    path : Path
        The label image.

    Returns
    -------
    dict of int to str
        Empty where there is neither.

    Raises
    ------
    StudyRefused
        With ``region-file-invalid`` where such a file is there and cannot be read.
    """
    stem = name_parts(path).stem
    table, document = path.with_name(f"{stem}.tsv"), path.with_name(f"{stem}.json")
    names: dict[int, str] = {}
    if document.is_file():
        names |= _names_from_json(document)
    if table.is_file():
        names |= _names_from_table(table)
    shown = [name.strip() for name in names.values()]
    if len(set(shown)) < len(shown) or "" in shown:
        source = table if table.is_file() else document
        raise _invalid(source, "name", "each label needs a name of its own")
    return names


def _names_from_table(table: Path) -> dict[int, str]:
    with table.open(encoding="utf-8-sig", newline="") as file:
        rows = csv.DictReader(file, delimiter="\t")
        if not {"index", "name"} <= set(rows.fieldnames or ()):
            raise _invalid(table, "its first line", "the columns index and name are wanted")
        try:
            return {int(row["index"]): row["name"] or "" for row in rows}
        except (TypeError, ValueError) as error:
            raise _invalid(table, "index", "whole numbers are wanted") from error


def _names_from_json(document: Path) -> dict[int, str]:
    try:
        content = json.loads(document.read_bytes())
    except (OSError, ValueError) as error:
        raise _invalid(document, "the document", str(error)) from error
    labels = content.get("labels") if isinstance(content, dict) else None
    if labels is None:
        return {}
    try:
        names = {int(label): name for label, name in labels.items()}
    except (AttributeError, TypeError, ValueError) as error:
        raise _invalid(document, "labels", 'the form {"1": "right lobe"} is wanted') from error
    if not all(isinstance(name, str) for name in names.values()):
        raise _invalid(document, "labels", "names in quotes are wanted")
    return names


def _invalid(path: Path, key: str, reason: str) -> StudyRefused:
    return StudyRefused(
        Finding.of("region-file-invalid", file=shown_name(path), key=key, reason=reason)
    )
