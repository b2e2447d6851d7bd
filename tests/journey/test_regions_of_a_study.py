"""Which regions are used: the named file, else those in the input, else those kept for the key."""

from __future__ import annotations

import json
import shutil
from pathlib import Path
from typing import Any

import nibabel as nib
import numpy as np
import pytest

from liverfe.errors import StudyRefused
from liverfe.journey import find_region_files, run_study
from liverfe.journey.drawn import read_drawn_regions
from liverfe.phantom import MadeStudy
from tests.journey.scans import edit, make_coarse


def names(document: dict[str, Any]) -> list[str]:
    return [region["name"] for region in document["regions"]]


def codes(document: dict[str, Any]) -> set[str]:
    return {finding["code"] for finding in document["findings"]}


def liver_alone(labels: Path, target: Path, name: str = "") -> Path:
    """Copy label 1 of a label image; BIDS-like table of names beside it where `name` is given."""
    image = nib.load(labels)
    data = (np.asanyarray(image.dataobj) == 1).astype(np.uint8)
    target.parent.mkdir(parents=True, exist_ok=True)
    nib.save(nib.Nifti1Image(data, image.affine), target)
    if name:
        table = target.with_name(target.name.replace(".nii.gz", ".tsv"))
        table.write_text(f"index\tname\n1\t{name}\n", encoding="utf-8")
    return target


def test_regions_inside_the_input_are_found(clean_study: MadeStudy, tmp_path: Path) -> None:
    outcome = run_study([clean_study.folder], out=tmp_path)
    assert "right lobe" in names(outcome.document)
    # The phantom leaves one drawing in two forms; only one of them counts.
    assert len(names(outcome.document)) == len(set(names(outcome.document)))
    assert "regions-in-two-forms" in codes(outcome.document)


def test_regions_kept_for_the_key_are_found(clean_study: MadeStudy, tmp_path: Path) -> None:
    key = run_study([clean_study.images], out=tmp_path).document["study"]["key"]
    liver_alone(clean_study.labels, tmp_path / "regions" / key / "reader.nii.gz", "drawn by hand")
    outcome = run_study([clean_study.images], out=tmp_path)
    assert names(outcome.document) == ["drawn by hand"]
    assert outcome.document["headline"] == "drawn by hand"


def test_a_named_file_goes_before_all_others(clean_study: MadeStudy, tmp_path: Path) -> None:
    named = liver_alone(clean_study.labels, tmp_path / "mine.nii.gz", "mine")
    found = find_region_files([clean_study.folder], out=tmp_path, key="0" * 16, named=named)
    assert found == (named,)


def test_two_readers_are_never_pooled(clean_study: MadeStudy, tmp_path: Path) -> None:
    scan = tmp_path / "scan"
    shutil.copytree(clean_study.images, scan / "images")
    for reader in ("one", "two"):
        liver_alone(clean_study.labels, scan / f"{reader}_regions.nii.gz", "liver")
    outcome = run_study([scan], out=tmp_path / "out")
    assert outcome.refused
    assert "regions-ambiguous" in codes(outcome.document)
    assert outcome.document["regions"] == []


def test_files_with_different_regions_are_used_together(
    clean_study: MadeStudy, tmp_path: Path
) -> None:
    files = [
        liver_alone(clean_study.labels, tmp_path / f"{name}_regions.nii.gz", name)
        for name in ("left lobe", "right lobe")
    ]
    drawn = read_drawn_regions(files)
    assert [region.name for region in drawn.regions] == ["left lobe", "right lobe"]
    assert len(drawn.inputs) == 2


def test_a_region_file_that_changes_while_it_is_read_is_refused(
    clean_study: MadeStudy, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    file = tmp_path / "regions.json"
    shutil.copy(clean_study.outlines, file)

    def read_while_it_is_written(path: Path) -> tuple[Any, ...]:
        path.write_bytes(path.read_bytes() + b"\n")
        return ()

    monkeypatch.setattr("liverfe.journey.drawn.read_regions", read_while_it_is_written)
    with pytest.raises(StudyRefused, match="changed while it was read"):
        read_drawn_regions([file])


def lose_one_image(study: MadeStudy, *, slice_from_top: int) -> None:
    """Remove one echo of one slice: a hole in the echo x slice table."""
    places: set[float] = set()
    edit(study.images, lambda d: places.add(float(d.ImagePositionPatient[2])))
    place = sorted(places)[-1 - slice_from_top]
    edit(
        study.images,
        lambda d: not (float(d.EchoTime) == 4.6 and float(d.ImagePositionPatient[2]) == place),
    )


def slices_of(labels: Path) -> list[int]:
    data = np.asanyarray(nib.load(labels).dataobj)
    return [k for k in range(data.shape[2]) if (data[..., k] == 1).any()]


def test_a_hole_inside_a_region_is_refused(tmp_path: Path) -> None:
    study = make_coarse(tmp_path / "study")
    touched = slices_of(study.labels)
    assert touched
    lose_one_image(study, slice_from_top=3 - touched[0])
    outcome = run_study([study.images], regions=study.labels, out=tmp_path / "out")
    assert outcome.refused
    assert "region-in-hole" in codes(outcome.document)


def test_a_hole_that_no_region_touches_is_a_caution(tmp_path: Path) -> None:
    study = make_coarse(tmp_path / "study")
    whole = run_study([study.images], regions=study.labels, out=tmp_path / "whole").document
    one_slice = liver_alone(study.labels, tmp_path / "low.nii.gz", "right lobe")
    image = nib.load(one_slice)
    data = np.asanyarray(image.dataobj).copy()
    lowest = slices_of(one_slice)[0]
    data[..., lowest + 1 :] = 0
    nib.save(nib.Nifti1Image(data, image.affine), one_slice)
    lose_one_image(study, slice_from_top=0)
    outcome = run_study([study.images], regions=one_slice, out=tmp_path / "out")
    assert not outcome.refused
    assert "holes-outside-regions" in codes(outcome.document)
    assert not any(f["level"] == "stop" for f in outcome.document["findings"])
    (measured,) = outcome.document["regions"]
    # The same object: the slice's median lies near that of the whole region.
    assert measured["r2star_per_s"]["value"] == pytest.approx(
        whole["regions"][0]["r2star_per_s"]["value"], rel=0.05
    )


def test_a_hole_without_any_region_is_refused(tmp_path: Path) -> None:
    study = make_coarse(tmp_path / "study")
    lose_one_image(study, slice_from_top=0)
    outcome = run_study([study.images], out=tmp_path / "out")
    assert outcome.refused
    assert "holes-in-echo-table" in codes(outcome.document)
    text = json.dumps(outcome.document["findings"])
    assert "0018,0081" in text
