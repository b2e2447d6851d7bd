"""Region files: label images and outlines, read for what they are or refused by key."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import nibabel as nib
import numpy as np
import pytest
from numpy.typing import NDArray

from liverfe.acquire import (
    check_frame_of_reference,
    find_regions,
    find_stacks,
    read_regions,
    write_outlines,
)
from liverfe.errors import StudyRefused, UsageError
from liverfe.grid import Grid
from liverfe.outlines import LabelMask, Outline, Region, rasterise
from tests.acquire import dicom_study as made

SHAPE = (made.COLUMNS, made.ROWS, made.N_SLICES)
GRID = Grid(shape=SHAPE, affine_mm=made.expected_affine())


def labels() -> NDArray[np.uint8]:
    found = np.zeros(SHAPE, dtype=np.uint8)
    found[3:9, 4:12, 1:3] = 1
    found[15:21, 10:15, 2] = 3
    return found


def save(path: Path, data: NDArray[Any]) -> Path:
    nib.save(nib.Nifti1Image(data, made.expected_affine()), path)
    return path


def refusal(path: Path) -> tuple[str, str]:
    with pytest.raises(StudyRefused) as refused:
        read_regions(path)
    finding = refused.value.findings[0]
    return finding.code, finding.text


# -------------------------------------------------------------------------------- label images


def test_each_label_becomes_a_region_on_its_own_grid(tmp_path: Path) -> None:
    first, third = read_regions(save(tmp_path / "x_regions.nii.gz", labels()))
    assert (first.name, third.name) == ("label 1", "label 3")
    assert isinstance(first.shape, LabelMask)
    np.testing.assert_array_equal(first.shape.mask, labels() == 1)
    np.testing.assert_array_equal(rasterise(third, GRID), labels() == 3)
    assert third.source == "label image"


def test_labels_saved_through_a_scale_factor_are_rounded(tmp_path: Path) -> None:
    """C2: nibabel scales an integer header to floats, and 3 comes back as 2.9999999993."""
    image = nib.Nifti1Image(labels().astype(np.float64), made.expected_affine())
    image.set_data_dtype(np.int16)
    nib.save(image, tmp_path / "x.nii.gz")
    as_loaded = nib.load(tmp_path / "x.nii.gz").get_fdata()
    assert (as_loaded == 3).sum() == 0, "else this test shows nothing"
    _, third = read_regions(tmp_path / "x.nii.gz")
    np.testing.assert_array_equal(rasterise(third, GRID), labels() == 3)


@pytest.mark.parametrize("value", [2.4, 0.01, np.nan])
def test_labels_that_are_no_whole_numbers_are_refused(tmp_path: Path, value: float) -> None:
    data = labels().astype(np.float32)
    data[0, 0, 0] = value
    code, text = refusal(save(tmp_path / "x.nii", data))
    assert code == "region-labels-not-whole"
    assert "x.nii" in text


def test_a_mask_that_was_flipped_with_its_affine_meets_the_same_tissue(tmp_path: Path) -> None:
    """C1: stored the other way round, placed by its own affine."""
    affine = made.expected_affine()
    affine[:3, 3] = GRID.to_mm([SHAPE[0] - 1, 0, 0])
    affine[:3, 0] *= -1
    nib.save(nib.Nifti1Image(labels()[::-1], affine), tmp_path / "x.nii")
    first, _ = read_regions(tmp_path / "x.nii")
    np.testing.assert_array_equal(rasterise(first, GRID), labels() == 1)


def test_names_come_from_the_bids_table_or_the_json_beside_the_image(tmp_path: Path) -> None:
    for stem, suffix, content in (
        ("sub-01_dseg", "tsv", "index\tname\tabbreviation\n1\tright lobe\tRL\n3\tspleen\tSP\n"),
        ("b_regions", "json", json.dumps({"labels": {"1": "right lobe", "3": "spleen"}})),
    ):
        save(tmp_path / f"{stem}.nii.gz", labels())
        (tmp_path / f"{stem}.{suffix}").write_text(content)
        regions = read_regions(tmp_path / f"{stem}.nii.gz")
        assert [region.name for region in regions] == ["right lobe", "spleen"]
        assert [region.organ for region in regions] == ["liver", "spleen"]


@pytest.mark.parametrize(
    ("suffix", "content", "key"),
    [
        ("tsv", "label\tname\n1\tx\n", "first line"),
        ("tsv", "index\tname\none\tx\n", "index"),
        ("tsv", "index\tname\n1\tx\n3\tx\n", "name"),
        ("json", '{"labels": ["x"]}', "labels"),
        ("json", '{"labels": {"1": 7}}', "labels"),
        ("json", "{", "the document"),
    ],
)
def test_a_broken_table_of_names_is_refused_by_key(
    tmp_path: Path, suffix: str, content: str, key: str
) -> None:
    save(tmp_path / "x.nii", labels())
    (tmp_path / f"x.{suffix}").write_text(content)
    code, text = refusal(tmp_path / "x.nii")
    assert code == "region-file-invalid"
    assert f"x.{suffix}" in text
    assert key in text


def test_an_image_without_label_or_with_a_fourth_axis_is_refused(tmp_path: Path) -> None:
    assert refusal(save(tmp_path / "a.nii", labels() * 0))[0] == "region-empty"
    twice = np.stack([labels()] * 2, axis=-1)
    assert refusal(save(tmp_path / "b.nii", twice))[0] == "region-file-invalid"
    assert refusal(save(tmp_path / "c.nii", labels().astype(np.int16) - 1))[0] == (
        "region-file-invalid"
    )


# -------------------------------------------------------------------------------- outline file

SQUARE = [[0.0, 0.0, 5.0], [40.0, 0.0, 5.0], [40.0, 30.0, 5.0], [0.0, 30.0, 5.0]]


def document(**changes: Any) -> dict[str, Any]:
    outlines = [{"role": "include", "points_mm": SQUARE}]
    return {
        "schema": 1,
        "kind": "liverfe outlines",
        "space": "patient RAS+ mm",
        "regions": [{"name": "right lobe", "outlines": outlines}],
    } | changes


def write(path: Path, content: Any) -> Path:
    path.write_text(json.dumps(content))
    return path


def test_outlines_are_read_with_role_name_and_organ(tmp_path: Path) -> None:
    regions = [
        {"name": "right lobe", "outlines": [{"role": "include", "points_mm": SQUARE}]},
        {"name": "mass", "organ": "lesion", "outlines": [{"points_mm": SQUARE}]},
        {"name": "spleen", "outlines": [{"points_mm": SQUARE}]},
    ]
    path = write(tmp_path / "x.json", document(regions=regions, frame_of_reference_uid="1.2.3"))
    read = read_regions(path)
    assert [region.name for region in read] == ["right lobe", "mass", "spleen"]
    assert [region.organ for region in read] == ["liver", "lesion", "spleen"]
    assert {region.frame_of_reference_uid for region in read} == {"1.2.3"}
    assert isinstance(read[0].shape, tuple)
    np.testing.assert_array_equal(read[0].shape[0].points_mm, SQUARE)


def test_outlines_that_are_written_read_back_the_same(tmp_path: Path) -> None:
    rng = np.random.default_rng(0)
    outlines = tuple(
        Outline(points_mm=rng.normal(0, 80, (9, 3)), role=role) for role in ("include", "exclude")
    )
    region = Region(
        name="Segment “7”", organ="liver", shape=outlines, frame_of_reference_uid="1.2.840.9"
    )
    write_outlines(tmp_path / "x.json", [region])
    (read,) = read_regions(tmp_path / "x.json")
    assert (read.name, read.organ) == (region.name, region.organ)
    assert read.frame_of_reference_uid == "1.2.840.9"
    assert isinstance(read.shape, tuple)
    for a, b in zip(read.shape, outlines, strict=True):
        assert a.role == b.role
        np.testing.assert_array_equal(a.points_mm, b.points_mm)
    assert [path.name for path in tmp_path.iterdir()] == ["x.json"], "no temporary file is left"


def test_a_label_mask_is_no_outline_to_write(tmp_path: Path) -> None:
    mask = Region(name="x", organ="liver", shape=LabelMask(mask=labels() == 1, grid=GRID))
    with pytest.raises(ValueError, match="label mask"):
        write_outlines(tmp_path / "x.json", [mask])
    assert list(tmp_path.iterdir()) == []


def region_with(**changes: Any) -> list[dict[str, Any]]:
    return [{"name": "x", "outlines": [{"points_mm": SQUARE}]} | changes]


def outline_with(**changes: Any) -> list[dict[str, Any]]:
    return region_with(outlines=[{"points_mm": SQUARE} | changes])


@pytest.mark.parametrize(
    ("changes", "key"),
    [
        ({"kind": "something else"}, "kind"),
        ({"schema": 2}, "schema"),
        ({"schema": True}, "schema"),
        ({"space": "patient LPS+ mm"}, "space"),
        ({"regions": {}}, "regions"),
        ({"region": []}, "the document.region"),
        ({"frame_of_reference_uid": 7}, "frame_of_reference_uid"),
        ({"regions": [7]}, "regions[0]"),
        ({"regions": region_with(name=7)}, "regions[0].name"),
        ({"regions": region_with(name=" ")}, "regions[0]"),
        ({"regions": region_with(colour="red")}, "regions[0].colour"),
        ({"regions": region_with() + region_with()}, "regions[1].name"),
        ({"regions": region_with(outlines=[])}, "regions[0]"),
        ({"regions": outline_with(role="exclude")}, "regions[0]"),
        ({"regions": outline_with(role="hole")}, "regions[0].outlines[0].role"),
        ({"regions": outline_with(points_mm=SQUARE[:2])}, "regions[0].outlines[0].points_mm"),
        (
            {"regions": outline_with(points_mm=[*SQUARE, [1.0, 2.0]])},
            "regions[0].outlines[0].points_mm[4]",
        ),
        (
            {"regions": outline_with(points_mm=[*SQUARE, [1.0, float("nan"), 2.0]])},
            "regions[0].outlines[0].points_mm[4]",
        ),
        (
            {"regions": outline_with(points_mm=[*SQUARE, [1.0, 2.0, 3e4]])},
            "regions[0].outlines[0].points_mm[4]",
        ),
    ],
)
def test_a_fault_in_an_outline_file_is_refused_by_the_path_of_its_key(
    tmp_path: Path, changes: dict[str, Any], key: str
) -> None:
    code, text = refusal(write(tmp_path / "x.json", document(**changes)))
    assert code == "region-file-invalid"
    assert f"x.json is not as it should be at {key}: " in text


def test_files_that_are_no_region_file_are_refused(tmp_path: Path) -> None:
    assert refusal(write(tmp_path / "a.json", document(regions=[])))[0] == "region-empty"
    (tmp_path / "b.json").write_text('{"kind": ')
    assert refusal(tmp_path / "b.json")[0] == "region-file-unreadable"
    (tmp_path / "c.nii").write_bytes(b"not what the suffix says")
    assert refusal(tmp_path / "c.nii")[0] == "region-file-unreadable"
    with pytest.raises(UsageError, match="does not exist"):
        read_regions(tmp_path / "absent.json")


# ------------------------------------------------------------- regions of a study's own folder


def test_regions_inside_a_study_are_found_and_are_no_echoes(tmp_path: Path) -> None:
    made.write_study(tmp_path / "images")
    drawn = tmp_path / "drawn"
    drawn.mkdir()
    save(drawn / "liver_Regions.nii.gz", labels())
    save(drawn / "sub-01_desc-rois_dseg.nii.gz", labels())
    write(drawn / "reader.json", document())
    write(drawn / "notes.json", {"kind": "something else"})
    found = find_regions([tmp_path])
    assert [path.name for path in found] == [
        "liver_Regions.nii.gz",
        "reader.json",
        "sub-01_desc-rois_dseg.nii.gz",
    ]
    survey = find_stacks([tmp_path])
    assert [plan.origin for plan in survey.stacks] == ["dicom"]
    assert {left.what: left.n_files for left in survey.left_out} == {"label image": 2}


def test_regions_of_another_frame_of_reference_are_refused(tmp_path: Path) -> None:
    """C7: the same millimetres, another place."""
    (plan,) = find_stacks([made.write_study(tmp_path / "images")]).stacks
    assert plan.grid is not None
    same = f"{made.ROOT}.1.99"
    for frame, is_fine in ((same, True), ("", True), ("1.2.3", False)):
        path = write(tmp_path / "x.json", document(frame_of_reference_uid=frame))
        regions = read_regions(path)
        if is_fine:
            check_frame_of_reference(regions, plan.grid)
        else:
            with pytest.raises(StudyRefused, match=r"\(0020,0052\)"):
                check_frame_of_reference(regions, plan.grid)


def test_the_example_of_the_reference_page_is_a_sound_outline_file(
    repository: Path, tmp_path: Path
) -> None:
    page = (repository / "docs" / "reference" / "outline-file.md").read_text(encoding="utf-8")
    example = page.split("```json\n", 1)[1].split("```", 1)[0]
    (tmp_path / "x.json").write_text(example)
    regions = read_regions(tmp_path / "x.json")
    assert [(region.name, region.organ) for region in regions] == [
        ("right lobe", "liver"),
        ("spleen", "spleen"),
    ]
