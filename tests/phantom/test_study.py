"""A whole study in one folder: repeatable, whole or not there, and its regions fit its images."""

from __future__ import annotations

import hashlib
import json
import subprocess
import sys
import time
from pathlib import Path

import nibabel as nib
import numpy as np
import pytest

import liverfe.phantom.study
from liverfe.errors import UsageError
from liverfe.outlines import Outline, Region, organ_from_name, rasterise
from liverfe.phantom import (
    FORMATS,
    Phantom,
    Recipe,
    load_recipe,
    make_phantom,
    make_study,
    write_dicom,
)

ALL_LAYOUTS = [(name, layout) for name, layouts in FORMATS.items() for layout in layouts]


def hashes(folder: Path) -> dict[str, str]:
    return {
        path.relative_to(folder).as_posix(): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


@pytest.mark.parametrize(("name", "layout"), ALL_LAYOUTS)
def test_same_recipe_and_seed_make_the_same_bytes(
    recipe: Recipe, tmp_path: Path, name: str, layout: str
) -> None:
    first = make_study(recipe, tmp_path / "a", format=name, layout=layout)
    second = make_study(recipe, tmp_path / "deeper" / "b", format=name, layout=layout)
    assert hashes(first.folder) == hashes(second.folder)
    assert first.n_image_files == sum(
        path.suffix in (".dcm", ".gz") for path in first.images.rglob("*")
    )


def test_another_seed_changes_the_images_and_not_the_anatomy(
    recipe: Recipe, tmp_path: Path
) -> None:
    first = hashes(make_study(recipe, tmp_path / "a", format="nifti").folder)
    other = make_study(recipe, tmp_path / "b", format="nifti", seed=8)
    second = hashes(other.folder)
    assert first.keys() == second.keys()
    changed = {name for name in first if first[name] != second[name]}
    assert "images/multi-echo_magnitude.nii.gz" in changed
    assert "truth/sub-synthetic01_desc-truth_R2starmap.nii.gz" in changed
    assert not {name for name in changed if name.startswith("regions/")}
    assert other.truth["seed"] == 8


def test_images_regions_and_truth_stand_apart(recipe: Recipe, tmp_path: Path) -> None:
    study = make_study(recipe, tmp_path / "study")
    assert {path.name for path in study.folder.iterdir()} == {"images", "regions", "truth"}
    assert {path.suffix for path in study.images.iterdir()} == {".dcm"}
    assert json.loads(study.truth_file.read_text()) == study.truth
    assert (study.truth["format"], study.truth["layout"]) == ("dicom", "one-series")
    sidecars = list((study.folder / "truth").glob("sub-*.json"))
    assert len(sidecars) == 3
    for sidecar in sidecars:
        assert "EchoTime" not in json.loads(sidecar.read_text())


def test_truth_maps_are_saved_as_they_are(recipe: Recipe, phantom: Phantom, tmp_path: Path) -> None:
    study = make_study(recipe, tmp_path / "study", format="nifti")
    saved = nib.load(study.folder / "truth" / "sub-synthetic01_desc-truth_R2starmap.nii.gz")
    assert np.array_equal(saved.get_fdata(), phantom.r2star_per_s, equal_nan=True)
    np.testing.assert_allclose(saved.affine, phantom.grid.affine_mm, atol=1e-5)
    s0 = nib.load(study.folder / "truth" / "sub-synthetic01_desc-truth_S0map.nii.gz")
    assert np.array_equal(s0.get_fdata(), phantom.s0)


def outline_regions(path: Path) -> list[Region]:
    document = json.loads(path.read_text())
    assert (document["schema"], document["kind"]) == (1, "liverfe outlines")
    assert document["space"] == "patient RAS+ mm"
    return [
        Region(
            name=region["name"],
            organ=organ_from_name(region["name"]),
            shape=tuple(
                Outline(points_mm=np.array(outline["points_mm"]), role=outline["role"])
                for outline in region["outlines"]
            ),
        )
        for region in document["regions"]
    ]


@pytest.mark.parametrize("name", ["small", "demo-thalassaemia-1p5t"])
def test_outlines_rasterised_are_the_label_image(recipe: Recipe, tmp_path: Path, name: str) -> None:
    plan = recipe if name == "small" else load_recipe(name)
    grid = make_phantom(plan, np.random.default_rng(plan.seed)).grid
    study = make_study(plan, tmp_path / "study", format="nifti")
    labels = np.asarray(nib.load(study.labels).dataobj)
    regions = outline_regions(study.outlines)
    assert [region.name for region in regions] == [plan.name for plan in plan.regions]
    assert any(o.role == "exclude" for o in regions[0].shape)
    for label, region in enumerate(regions, start=1):
        assert np.array_equal(rasterise(region, grid), labels == label)


def test_the_label_table_names_what_the_label_image_holds(recipe: Recipe, tmp_path: Path) -> None:
    study = make_study(recipe, tmp_path / "study", format="nifti")
    rows = (study.folder / "regions" / "phantom_regions.tsv").read_text().splitlines()
    assert rows == ["index\tname", "1\tright lobe", "2\tspleen", "3\tleft lobe"]
    labels = np.asarray(nib.load(study.labels).dataobj)
    assert [int(n) for n in np.bincount(labels.ravel())[1:]] == [
        region["n_voxels"] for region in study.truth["regions"]
    ]


def test_regions_of_the_demo_are_named_after_their_organs() -> None:
    organs = [organ_from_name(plan.name) for plan in load_recipe("demo-thalassaemia-1p5t").regions]
    assert organs == ["liver", "spleen", "muscle"]


def test_a_folder_that_holds_something_is_left_alone(recipe: Recipe, tmp_path: Path) -> None:
    folder = tmp_path / "mine"
    folder.mkdir()
    (folder / "notes.txt").write_text("mine")
    for replace in (False, True):
        with pytest.raises(UsageError, match=r"already there|no synthetic study"):
            make_study(recipe, folder, replace=replace)
    assert (folder / "notes.txt").read_text() == "mine"
    assert [path.name for path in tmp_path.iterdir()] == ["mine"]


def test_a_study_made_before_is_replaced_on_request_only(recipe: Recipe, tmp_path: Path) -> None:
    folder = tmp_path / "study"
    folder.mkdir()
    make_study(recipe, folder, format="nifti")
    with pytest.raises(UsageError, match="already there"):
        make_study(recipe, folder, format="nifti")
    study = make_study(recipe, folder, seed=9, replace=True)
    assert study.truth["seed"] == 9
    assert {path.suffix for path in study.images.iterdir()} == {".dcm"}
    assert [path.name for path in tmp_path.iterdir()] == ["study"]


def test_a_failure_on_the_way_leaves_nothing_behind(
    recipe: Recipe, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full_disk(*_: object, **__: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(liverfe.phantom.study, "write_truth", full_disk)
    with pytest.raises(OSError, match="No space"):
        make_study(recipe, tmp_path / "study")
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"format": "png"}, "--format png: use one of dicom, nifti"),
        ({"format": "nifti", "layout": "repeats"}, "--layout repeats: for --format nifti use"),
        ({"seed": -1}, "--seed -1: must not be negative"),
        ({"recipe": "nothing"}, "no recipe 'nothing'"),
    ],
)
def test_a_wrong_call_is_refused_before_anything_is_written(
    recipe: Recipe, tmp_path: Path, options: dict, message: str
) -> None:
    with pytest.raises(UsageError, match=message):
        make_study(options.pop("recipe", recipe), tmp_path / "study", **options)
    assert not list(tmp_path.iterdir())


def test_the_phantom_never_loads_the_science_that_it_tests() -> None:
    code = (
        "import sys, liverfe.phantom; print([name for name in sys.modules if name.startswith("
        "tuple('liverfe.' + room for room in ('fit', 'noise', 'maps', 'regions', 'calibration',"
        " 'study', 'acquire')))])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


@pytest.mark.bench
def test_files_are_written_at_a_few_milliseconds_each(tmp_path: Path) -> None:
    # Wanted: the 288 files of the bench recipe within about 2 s, so 7 ms a file. Processor time,
    # since the clock also counts what else a machine does; twice that for slow machines.
    recipe = load_recipe("demo-thalassaemia-1p5t")
    phantom = make_phantom(recipe, np.random.default_rng(recipe.seed))
    started = time.process_time()
    n_files = len(write_dicom(phantom, tmp_path))
    assert (time.process_time() - started) / n_files < 0.014
