"""The truth that goes with the files: maps, and numbers for each region."""

from __future__ import annotations

import dataclasses
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from liverfe.phantom.drawn import outline_document
from liverfe.phantom.effects import EffectsPlan, true_times_ms
from liverfe.phantom.make import Phantom
from liverfe.phantom.nifti import save_volume, write_json
from liverfe.phantom.recipe import Recipe
from liverfe.units import ml_from_mm3

__all__ = ["truth_document", "write_regions", "write_truth"]

_MAP_NAME = "sub-synthetic01_desc-truth"
"""Names as BIDS gives derivatives: a reader of images knows by them that these are none."""

_DIGITS = 10
"""Significant digits of truth: more than any fit, fewer than differ between processors."""


def truth_document(phantom: Phantom) -> dict[str, Any]:
    """Tell the truth about a phantom in numbers.

    Parameters
    ----------
    phantom : Phantom
        Any.

    Returns
    -------
    dict
        Ready for JSON: the recipe's name, digest and seed, echo times, field, noise, storage, and
        for each region its size and the median, mean and SD of true R2* and S0; ``effects`` where
        the recipe has any.
    """
    recipe = phantom.recipe
    document = {
        "schema": 1,
        "kind": "liverfe phantom truth",
        "synthetic": True,
        "recipe": recipe.name,
        "recipe_digest": recipe.digest,
        "seed": recipe.seed,
        "echo_times_ms": list(recipe.echo_times_ms),
        "field_strength_t": recipe.scanner.field_strength_t,
        "imaging_frequency_mhz": recipe.scanner.imaging_frequency_mhz,
        "shape": list(phantom.grid.shape),
        "affine_mm": phantom.grid.affine_mm.tolist(),
        "noise": {"sigma": recipe.noise.sigma, "n_channels": recipe.noise.n_channels},
        "storage": {
            "slope_per_echo": list(recipe.storage.slope_per_echo),
            "bits": recipe.storage.bits,
        },
        "regions": [
            _region(phantom, label, plan.name) for label, plan in enumerate(recipe.regions, start=1)
        ],
    }
    effects = _effects(recipe)
    return document | ({"effects": effects} if effects else {})


def _effects(recipe: Recipe) -> dict[str, Any]:
    """What went wrong in the scan, and the fat of each tissue; empty if nothing."""
    plan, nothing = dataclasses.asdict(recipe.effects), dataclasses.asdict(EffectsPlan())
    found = {key: value for key, value in plan.items() if value != nothing[key]}
    if "order" in found or "lost_echo" in found:
        times = true_times_ms(recipe.echo_times_ms, recipe.effects)
        found["true_echo_times_ms"] = list(times)
    fat = {tissue.name: tissue.fat_fraction for tissue in recipe.tissues if tissue.fat_fraction}
    return found | ({"fat_fraction": fat} if fat else {})


def _region(phantom: Phantom, label: int, name: str) -> dict[str, Any]:
    where = phantom.regions == label
    voxel_mm3 = float(np.prod(phantom.grid.voxel_size_mm))
    s0 = _summary(phantom.s0[where])
    sigma = phantom.recipe.noise.sigma
    return {
        "label": label,
        "name": name,
        "n_voxels": int(where.sum()),
        "n_slices": int(where.any(axis=(0, 1)).sum()),
        "volume_ml": _short(ml_from_mm3(int(where.sum()) * voxel_mm3)),
        "r2star_per_s": _summary(phantom.r2star_per_s[where]),
        "s0": s0,
        "sigma": sigma,
        "snr": _short(s0["median"] / sigma) if sigma > 0.0 else None,
    }


def _summary(values: NDArray[np.float32]) -> dict[str, float]:
    exact = values.astype(np.float64)
    numbers = {
        "median": np.median(exact),
        "mean": exact.mean(),
        "sd": exact.std(),
        "lowest": exact.min(),
        "highest": exact.max(),
    }
    return {key: _short(float(number)) for key, number in numbers.items()}


def _short(number: float) -> float:
    return float(f"{number:.{_DIGITS}g}")


def write_truth(phantom: Phantom, folder: Path, *, made: dict[str, Any]) -> dict[str, Any]:
    """Write the truth: maps and ``truth.json``.

    The maps are named as BIDS derivatives; their sidecars hold no echo time and say that they are
    no images to measure.

    Parameters
    ----------
    phantom : Phantom
        Any.
    folder : Path
        Made if it is not there.
    made : dict
        Further entries for ``truth.json``, for example format and layout.

    Returns
    -------
    dict
        What ``truth.json`` holds.
    """
    folder.mkdir(parents=True, exist_ok=True)
    maps: dict[str, tuple[NDArray[Any], str | None, str]] = {
        "R2starmap": (phantom.r2star_per_s, "1/s", "true R2*; NaN in air"),
        "S0map": (phantom.s0, "arbitrary", "true signal at echo time zero"),
        "tissues": (phantom.structures.labels, None, "label of each structure; 0 is air"),
    }
    for suffix, (data, units, text) in maps.items():
        stem = f"{_MAP_NAME}_{suffix}"
        save_volume(folder / f"{stem}.nii.gz", data, phantom.grid)
        sidecar = {"Synthetic": True, "Description": f"Truth of a phantom, no scan: {text}."}
        write_json(folder / f"{stem}.json", sidecar | ({} if units is None else {"Units": units}))
    _write_label_table(folder / f"{_MAP_NAME}_tissues.tsv", phantom.structures.names)
    document = truth_document(phantom) | made
    write_json(folder / "truth.json", document)
    return document


def write_regions(
    phantom: Phantom, folder: Path, *, frame_of_reference_uid: str = ""
) -> tuple[Path, Path]:
    """Write the regions, as a label image with its table and as an outline file.

    Parameters
    ----------
    phantom : Phantom
        Any.
    folder : Path
        Made if it is not there.
    frame_of_reference_uid : str
        Of the DICOM images that the outlines belong to; empty for NIfTI, which has none.

    Returns
    -------
    labels, outlines : Path
        ``phantom_regions.nii.gz`` (with ``phantom_regions.tsv``: index, name) and
        ``phantom_outlines.json``.
    """
    folder.mkdir(parents=True, exist_ok=True)
    labels, outlines = folder / "phantom_regions.nii.gz", folder / "phantom_outlines.json"
    save_volume(labels, phantom.regions, phantom.grid)
    names = tuple(plan.name for plan in phantom.recipe.regions)
    _write_label_table(folder / "phantom_regions.tsv", names)
    document = outline_document(phantom.recipe, phantom.regions, phantom.grid)
    if frame_of_reference_uid:
        document["frame_of_reference_uid"] = frame_of_reference_uid
    write_json(outlines, document, indent=None)
    return labels, outlines


def _write_label_table(path: Path, names: tuple[str, ...]) -> None:
    rows = ["index\tname", *(f"{index}\t{name}" for index, name in enumerate(names, start=1))]
    path.write_text("\n".join(rows) + "\n", encoding="utf-8", newline="\n")
