"""One synthetic study in one folder: images, regions and truth, whole or not at all."""

from __future__ import annotations

import os
import shutil
import uuid
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from liverfe.errors import UsageError
from liverfe.phantom.dicom import DICOM_LAYOUTS, frame_of_reference_uid, write_dicom
from liverfe.phantom.library import load_recipe
from liverfe.phantom.make import make_phantom
from liverfe.phantom.nifti import NIFTI_LAYOUTS, write_nifti
from liverfe.phantom.recipe import Recipe
from liverfe.phantom.truth import write_regions, write_truth

__all__ = ["FORMATS", "MadeStudy", "make_study"]

FORMATS: dict[str, dict[str, str]] = {"dicom": DICOM_LAYOUTS, "nifti": NIFTI_LAYOUTS}
"""Format -> its layouts and what they are; the first layout is the format's default."""


@dataclass(frozen=True, slots=True, kw_only=True)
class MadeStudy:
    """Where a synthetic study lies.

    Attributes
    ----------
    folder : Path
        Holds ``images/``, ``regions/`` and ``truth/``.
    images : Path
        Folder to give to a reader.
    n_image_files : int
        DICOM or NIfTI files in `images`.
    labels, outlines : Path
        The regions, as label image and as outline file.
    truth_file : Path
        ``truth.json``.
    truth : dict
        What it holds.
    """

    folder: Path
    images: Path
    n_image_files: int
    labels: Path
    outlines: Path
    truth_file: Path
    truth: dict[str, Any]


def make_study(
    recipe: Recipe | str | Path,
    out: Path | str,
    *,
    format: str = "dicom",
    layout: str | None = None,
    seed: int | None = None,
    transfer_syntax: str = "explicit-le",
    replace: bool = False,
) -> MadeStudy:
    """Make a synthetic study: images, regions and truth.

    It is written to a hidden folder beside `out` and renamed when whole.

    Parameters
    ----------
    recipe : Recipe, str or Path
        A recipe, the name of one that ships, or a path.
    out : Path or str
        Folder of the study; must not exist or be empty, unless `replace`.
    format : {'dicom', 'nifti'}
        Of the images.
    layout : str, optional
        A layout of that format (`FORMATS`); left out, its first.
    seed : int, optional
        In place of the recipe's own.
    transfer_syntax : str
        Of DICOM files; a key of `TRANSFER_SYNTAXES`.
    replace : bool
        Replace a study that was made here before; no other folder is ever replaced.

    Returns
    -------
    MadeStudy
        Paths and truth.

    Raises
    ------
    UsageError
        If format, layout, seed or recipe are wrong, or `out` is in the way.
    """
    plan = recipe if isinstance(recipe, Recipe) else load_recipe(recipe)
    if format not in FORMATS:
        raise UsageError(f"--format {format}: use one of {', '.join(FORMATS)}")
    layout = next(iter(FORMATS[format])) if layout is None else layout
    if layout not in FORMATS[format]:
        known = ", ".join(FORMATS[format])
        raise UsageError(f"--layout {layout}: for --format {format} use one of {known}")
    if seed is not None:
        if seed < 0:
            raise UsageError(f"--seed {seed}: must not be negative")
        plan = plan.with_seed(seed)
    folder = Path(out)
    _refuse_occupied(folder, replace=replace)
    folder.parent.mkdir(parents=True, exist_ok=True)
    unfinished = folder.with_name(f".{folder.name}.{uuid.uuid4().hex[:8]}.unfinished")
    try:
        n_files, truth = _write(plan, unfinished, format, layout, transfer_syntax)
        _put_in_place(unfinished, folder)
    finally:
        shutil.rmtree(unfinished, ignore_errors=True)
    return MadeStudy(
        folder=folder,
        images=folder / "images",
        n_image_files=n_files,
        labels=folder / "regions" / "phantom_regions.nii.gz",
        outlines=folder / "regions" / "phantom_outlines.json",
        truth_file=folder / "truth" / "truth.json",
        truth=truth,
    )


def _write(
    recipe: Recipe, folder: Path, format: str, layout: str, transfer_syntax: str
) -> tuple[int, dict[str, Any]]:
    rng = np.random.default_rng(recipe.seed)
    phantom = make_phantom(recipe, rng, with_phase=layout == "with-phase")
    images = folder / "images"
    if format == "dicom":
        files = write_dicom(phantom, images, layout=layout, transfer_syntax=transfer_syntax)
        frame = frame_of_reference_uid(phantom, layout=layout, transfer_syntax=transfer_syntax)
    else:
        files = write_nifti(phantom, images, layout=layout)
        frame = ""
    write_regions(phantom, folder / "regions", frame_of_reference_uid=frame)
    truth = write_truth(phantom, folder / "truth", made={"format": format, "layout": layout})
    return len(files), truth


def _refuse_occupied(folder: Path, *, replace: bool) -> None:
    if not folder.exists() or (folder.is_dir() and not any(folder.iterdir())):
        return
    if not replace:
        raise UsageError(f"{folder} is already there: choose another folder")
    if not (folder / "truth" / "truth.json").is_file():
        raise UsageError(f"{folder} holds no synthetic study, so it is not replaced")


def _put_in_place(unfinished: Path, folder: Path) -> None:
    if not folder.exists():
        os.replace(unfinished, folder)
        return
    old = folder.with_name(f".{folder.name}.{uuid.uuid4().hex[:8]}.old")
    os.replace(folder, old)
    os.replace(unfinished, folder)
    shutil.rmtree(old)
