"""Small synthetic studies made by the phantom, and faults planted into their files."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pydicom

from liverfe.phantom import MadeStudy, make_study

REPOSITORY = Path(__file__).resolve().parents[2]

COARSE = {
    "columns = 160": "columns = 64",
    "rows = 128": "rows = 52",
    "slices = 10": "slices = 4",
    "pixel_size_mm = [2.4, 2.4]": "pixel_size_mm = [6.0, 6.0]",
    "slice_thickness_mm = 8.0": "slice_thickness_mm = 20.0",
    "slice_spacing_mm = 9.0": "slice_spacing_mm = 22.0",
}
"""The demo's recipe on a coarse grid: 48 files, and the truth stays what it is."""

TRUE_R2STAR_PER_S = 384.0
"""Mean R2* of the liver in the recipe; its median over voxels is 0.5 % less (gamma, CV 0.12)."""

TRUE_LIC_MG_PER_G = -0.16 + 0.02603 * 382.16
"""By the equation of DOI 10.1148/radiol.213256 at the recipe's median R2*: 9.79."""


def coarse_recipe(folder: Path, **replaced: str) -> Path:
    """Write the coarse recipe, further ``key=value`` lines replaced."""
    text = (REPOSITORY / "phantoms" / "demo-thalassaemia-1p5t.toml").read_text(encoding="utf-8")
    lines = {f"{key} = ": f"{key} = {value}" for key, value in replaced.items()}
    for full, coarse in COARSE.items():
        assert text.count(full) == 1
        text = text.replace(full, coarse)
    changed = [
        next((new for start, new in lines.items() if line.startswith(start)), line)
        for line in text.splitlines()
    ]
    folder.mkdir(parents=True, exist_ok=True)
    path = folder / "coarse.toml"
    path.write_text("\n".join(changed), encoding="utf-8")
    return path


def make_coarse(folder: Path, *, seed: int = 1, **options: Any) -> MadeStudy:
    """Make a coarse study in `folder`; another seed makes another study."""
    recipe = coarse_recipe(folder.parent / f".{folder.name}-recipe", **options.pop("recipe", {}))
    return make_study(recipe, folder, seed=seed, **options)


def edit(folder: Path, change: Callable[[pydicom.Dataset], Any]) -> int:
    """Apply `change` to every DICOM file under `folder`; False removes the file.

    Returns
    -------
    int
        How many files were removed.
    """
    removed = 0
    for path in sorted(p for p in folder.rglob("*") if p.is_file()):
        if path.suffix in (".json", ".gz", ".nii", ".tsv", ".toml"):
            continue
        dataset = pydicom.dcmread(path)
        if change(dataset) is False:
            path.unlink()
            removed += 1
        else:
            dataset.save_as(path)
    return removed


def set_tag(keyword: str, value: Any) -> Callable[[pydicom.Dataset], None]:
    """Make a change that sets one element everywhere; None deletes it."""

    def change(dataset: pydicom.Dataset) -> None:
        if value is None:
            if keyword in dataset:
                delattr(dataset, keyword)
        else:
            setattr(dataset, keyword, value)

    return change


def all_text(folder: Path) -> bytes:
    """Join every file under `folder` and every name, for a search of planted words."""
    parts = []
    for path in sorted(folder.rglob("*")):
        parts.append(str(path.relative_to(folder)).encode())
        if path.is_file():
            parts.append(path.read_bytes())
    return b"\n".join(parts)
