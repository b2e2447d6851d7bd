"""Every row of the contract's table of verdicts: outcome, LIC and exit status of `run`."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pydicom
import pytest

from liverfe.phantom import MadeStudy
from tests.cli.conftest import Run
from tests.journey.scans import TRUE_LIC_MG_PER_G, edit, make_coarse, set_tag


def codes(document: dict[str, Any], level: str) -> set[str]:
    return {f["code"] for f in document["findings"] if f["level"] == level}


def headline(document: dict[str, Any]) -> dict[str, Any]:
    (region,) = [r for r in document["regions"] if r["name"] == document["headline"]]
    return region


def folder_of(out: Path, document: dict[str, Any]) -> Path:
    folder = out / document["study"]["key"]
    assert json.loads((folder / "result.json").read_bytes()) == document
    assert (folder / "manifest.json").is_file()
    assert (folder / "report.pdf").read_bytes().startswith(b"%PDF-")
    return folder


def refused(status: int, document: dict[str, Any], out: Path, *expected: str) -> None:
    """A refusal: status 3, the reason, no number, and a folder that says why."""
    assert status == 3
    assert document["outcome"] == "refused"
    assert set(expected) <= codes(document, "stop")
    assert document["regions"] == []
    assert [document[key] for key in ("headline", "limits", "noise", "calibration")] == [None] * 4
    for finding in document["findings"]:
        assert finding["text"]
        assert finding["remedy"]
    folder = folder_of(out, document)
    assert sorted(p.name for p in folder.iterdir()) == [
        "manifest.json",
        "report.pdf",
        "result.json",
    ]


def test_measured_and_nothing_to_say(run_json: Run, clean_study: MadeStudy, tmp_path: Path) -> None:
    status, document = run_json(
        "run", clean_study.images, "--regions", clean_study.labels, "--out", tmp_path
    )
    assert status == 0
    assert document["outcome"] == "reported"
    assert codes(document, "caution") == set()
    lic = headline(document)["lic_mg_per_g"]
    # The recipe's truth, 2 % as the issue asks; a coarse grid holds partial volume of its own.
    assert lic["value"] == pytest.approx(TRUE_LIC_MG_PER_G, rel=0.02)
    assert lic["qualifier"] == "="
    folder = folder_of(tmp_path, document)
    assert (folder / "regions.csv").is_file()
    assert list((folder / "maps").glob("*_R2starmap.nii.gz"))


def test_measured_with_a_doubt(run_json: Run, tmp_path: Path) -> None:
    study = make_coarse(tmp_path / "study")
    edit(study.images, set_tag("ContrastBolusAgent", "Gadolinium, invented"))
    status, document = run_json(
        "run", study.images, "--regions", study.labels, "--out", tmp_path / "out"
    )
    assert status == 0
    assert "contrast-agent" in codes(document, "caution")
    assert headline(document)["lic_mg_per_g"]["value"] > 0


def test_beyond_what_the_scan_resolves(run_json: Run, tmp_path: Path) -> None:
    # First echo at 2.4 ms: by the table in the user's sheet some 355 1/s can be told at SNR 50.
    recipe = {"first_ms": "2.4", "spacing_ms": "2.4", "r2star_per_s": "900.0"}
    study = make_coarse(tmp_path / "study", recipe=recipe)
    status, document = run_json(
        "run", study.images, "--regions", study.labels, "--out", tmp_path / "out"
    )
    assert status == 0
    region = headline(document)
    assert region["r2star_per_s"]["qualifier"] == region["lic_mg_per_g"]["qualifier"] == ">"
    assert region["lic_mg_per_g"]["value"] == pytest.approx(region["limits"]["lic_mg_per_g"][1])
    assert region["lic_mg_per_g"]["high"] is None


@pytest.mark.parametrize(
    ("field_t", "frequency_mhz", "code"),
    [(None, None, "field-unknown"), (0.55, 23.4, "no-curve-for-field")],
)
def test_r2star_stands_and_lic_may_not_be_stated(
    run_json: Run, tmp_path: Path, field_t: float | None, frequency_mhz: float | None, code: str
) -> None:
    study = make_coarse(tmp_path / "study")
    edit(study.images, set_tag("MagneticFieldStrength", field_t))
    edit(study.images, set_tag("ImagingFrequency", frequency_mhz))
    status, document = run_json(
        "run", study.images, "--regions", study.labels, "--out", tmp_path / "out"
    )
    assert status == 0
    assert code in codes(document, "caution")
    region = headline(document)
    assert region["r2star_per_s"]["value"] == pytest.approx(382.16, rel=0.02)
    assert region["lic_mg_per_g"] is None
    assert document["calibration"] is None


def test_no_region_gives_maps_alone(run_json: Run, clean_study: MadeStudy, tmp_path: Path) -> None:
    status, document = run_json("run", clean_study.images, "--out", tmp_path)
    assert status == 0
    assert "no-region" in codes(document, "caution")
    assert document["regions"] == []
    assert document["headline"] is None
    assert list((folder_of(tmp_path, document) / "maps").glob("*_R2starmap.nii.gz"))


def spin_echo(dataset: pydicom.Dataset) -> None:
    dataset.ScanningSequence = "SE"


def one_echo(dataset: pydicom.Dataset) -> bool:
    return float(dataset.EchoTime) < 1.5


def no_echo_time(dataset: pydicom.Dataset) -> None:
    del dataset.EchoTime


def phase_only(dataset: pydicom.Dataset) -> None:
    dataset.ImageType = ["ORIGINAL", "PRIMARY", "P", "ND"]
    dataset.ComplexImageComponent = "PHASE"


def mean_echo(dataset: pydicom.Dataset) -> None:
    dataset.EchoTime = 1.0


@pytest.mark.parametrize(
    ("change", "code", "tag"),
    [
        (spin_echo, "spin-echo", "0018,0020"),
        (one_echo, "one-echo", "0018,0081"),
        (no_echo_time, "echo-time-missing", "0018,0081"),
        (phase_only, "no-magnitude", "phase"),
        (mean_echo, "echo-time-repeated", "0018,0081"),
    ],
)
def test_nothing_to_trust_is_refused_with_tag_and_remedy(
    run_json: Run, tmp_path: Path, change: Any, code: str, tag: str
) -> None:
    study = make_coarse(tmp_path / "study")
    edit(study.images, change)
    out = tmp_path / "out"
    status, document = run_json("run", study.images, "--regions", study.labels, "--out", out)
    refused(status, document, out, code)
    assert any(tag in f["text"] for f in document["findings"] if f["code"] == code)


def test_a_region_outside_the_image_is_refused(
    run_json: Run, clean_study: MadeStudy, tmp_path: Path
) -> None:
    outlines = json.loads(clean_study.outlines.read_text(encoding="utf-8"))

    def move(node: Any) -> Any:
        if isinstance(node, list) and len(node) == 3 and all(isinstance(x, float) for x in node):
            return [node[0] + 5000.0, node[1], node[2]]
        if isinstance(node, list):
            return [move(item) for item in node]
        if isinstance(node, dict):
            return {key: move(value) for key, value in node.items()}
        return node

    moved = tmp_path / "moved.json"
    moved.write_text(json.dumps(move(outlines)), encoding="utf-8")
    out = tmp_path / "out"
    status, document = run_json("run", clean_study.images, "--regions", moved, "--out", out)
    refused(status, document, out, "region-outside-image")


def test_an_input_without_images_is_refused(run_json: Run, tmp_path: Path) -> None:
    (tmp_path / "scan").mkdir()
    (tmp_path / "scan" / "notes.txt").write_text("nothing here", encoding="ascii")
    out = tmp_path / "out"
    status, document = run_json("run", tmp_path / "scan", "--out", out)
    refused(status, document, out, "no-stack")


def test_several_stacks_are_listed_and_one_may_be_chosen(run_json: Run, tmp_path: Path) -> None:
    study = make_coarse(tmp_path / "study", layout="repeats")
    out = tmp_path / "out"
    call = ("run", study.images, "--regions", study.labels, "--out", out)
    status, document = run_json(*call)
    refused(status, document, out, "several-stacks")
    (listed,) = [f["text"] for f in document["findings"] if f["code"] == "several-stacks"]
    assert "stack 1" in listed
    assert "stack 2" in listed
    key = document["study"]["key"]
    for number, expected in ((1, key), (2, f"{key}-2")):
        status, document = run_json(*call, "--stack", number)
        assert status == 0
        assert document["study"]["key"] == expected
        assert headline(document)["lic_mg_per_g"]["value"] == pytest.approx(
            TRUE_LIC_MG_PER_G, rel=0.02
        )
    # The refusal was a result too: it moved aside and was not overwritten.
    assert (out / f"{key}.v1" / "result.json").is_file()
    status, document = run_json(*call, "--stack", 3)
    assert status == 2
    assert document["error"]["kind"] == "usage"
