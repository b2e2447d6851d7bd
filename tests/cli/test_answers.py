"""What the program answers: exit statuses, one JSON document, and nothing of the patient."""

from __future__ import annotations

import json
import os
import re
import shutil
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from liverfe.cli import main
from liverfe.phantom import MadeStudy
from tests.cli.conftest import Run
from tests.journey.scans import edit, make_coarse, set_tag
from tests.journey.test_choices import OWN_CURVE


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["runn"], "Did you mean 'run'"),
        (["run", "nowhere", "--out", "x"], "nowhere"),
        (["run", ".", "--outt", "x"], "--out"),
        (["run", "."], "--out"),
        (["run", ".", "--out", "x", "--stack", "0"], "--stack"),
        (["run", ".", "--out", "x", "--identity", "name"], "full or key"),
        (["run", ".", "--out", "x", "--curve", "hernando"], "Did you mean"),
        (["run", ".", "--out", "x", "--echo-times-ms", "0.001,0.002"], "seconds"),
        (["run", ".", "--out", "x", "--echo-times-ms", "one"], "comma-separated"),
        (["run", ".", "--out", "x", "--regions", "nowhere.nii"], "nowhere.nii"),
        (["batch", ".", "--out", "x", "--workers", "0"], "--workers"),
        (["phantom", "make", "demo-thalasemia", "--out", "x"], "demo-thalassaemia-1p5t"),
        (["phantom", "make", "two-echoes", "--out", "x", "--layout", "heap"], "heap"),
        (["verify", "nowhere"], "nowhere"),
        (["curves", "--curve-file", "nowhere.toml"], "nowhere.toml"),
    ],
)
def test_a_wrong_call_ends_with_2_and_says_what_is_wrong(
    arguments: list[str], said: str, capsys: pytest.CaptureFixture[str], tmp_path: Path
) -> None:
    before = sorted(tmp_path.rglob("*"))
    assert main(arguments) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert said in captured.err
    assert "Traceback" not in captured.err
    assert sorted(tmp_path.rglob("*")) == before


def test_a_wrong_call_with_json_gives_a_document(run_json: Run) -> None:
    for arguments in (["run", "nowhere", "--out", "x"], ["runn"], ["curves", "--nothing"]):
        status, document = run_json(*arguments)
        assert status == 2
        assert document["error"]["kind"] == "usage"
        assert document["error"]["message"]


def test_a_fault_of_ours_ends_with_1_and_shows_nothing_of_the_patient(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(*unused: object, **unused_too: object) -> None:
        raise KeyError("Quixleyplant^Zelda")

    monkeypatch.setattr("liverfe.journey.one_study.find_stacks", fail)
    call = ["run", str(tmp_path), "--out", str(tmp_path / "out")]
    assert main(call) == 1
    captured = capsys.readouterr()
    assert captured.out == ""
    assert "fault of ours" in captured.err
    assert re.search(r"incident [0-9a-f]{8}: KeyError in liverfe/\S+\.py, line \d+", captured.err)
    assert "Quixleyplant" not in captured.err
    assert main([*call, "--json"]) == 1
    captured = capsys.readouterr()
    assert json.loads(captured.out)["error"]["kind"] == "fault"
    assert "Quixleyplant" not in captured.out + captured.err
    monkeypatch.setenv("LIVERFE_TRACEBACK", "1")
    assert main(call) == 1
    assert "Quixleyplant" in capsys.readouterr().err


def test_what_the_system_refuses_ends_with_1_in_its_words(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(*unused: object, **unused_too: object) -> None:
        raise OSError(5, "Input/output error", "/data/Quixleyplant")

    monkeypatch.setattr("liverfe.journey.one_study.find_stacks", fail)
    assert main(["run", str(tmp_path), "--out", str(tmp_path / "out")]) == 1
    said = capsys.readouterr().err
    assert "Input/output error" in said
    assert "Quixleyplant" not in said


def test_an_interrupt_ends_with_130(
    capsys: pytest.CaptureFixture[str], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def interrupt(*unused: object, **unused_too: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr("liverfe.journey.one_study.find_stacks", interrupt)
    # While kernels are being loaded the process is left at once, and the tests would go with it.
    left: list[int] = []
    monkeypatch.setattr("os._exit", left.append)
    assert main(["run", str(tmp_path), "--out", str(tmp_path / "out")]) == 130
    assert left in ([], [130])
    assert "Traceback" not in capsys.readouterr().err


def test_inspect_tells_what_a_run_would_find_and_writes_nothing(
    run_json: Run, clean_study: MadeStudy, tmp_path: Path
) -> None:
    before = sorted(tmp_path.rglob("*"))
    status, document = run_json("inspect", clean_study.images)
    assert sorted(tmp_path.rglob("*")) == before
    assert status == 0
    assert document["verdict"] == "usable"
    (stack,) = document["stacks"]
    assert (stack["number"], stack["study_key"]) == (1, None)
    assert (stack["n_images"], stack["n_images_expected"]) == (48, 48)
    assert stack["completeness"] is None
    assert stack["curve"]["key"] == "hernando2023_1p5"
    # The user's sheet, echoes 1.0 + 1.2 k ms, k = 0..11: CV 10 % at 276, 805 and 1265 1/s.
    expected = {20.0: 276, 50.0: 805, 100.0: 1265}
    for row in stack["reportable"]:
        assert row["r2star_per_s"][1] == pytest.approx(expected[row["snr"]], rel=0.02)
        lic = -0.16 + 0.02603 * row["r2star_per_s"][1]
        assert row["lic_mg_per_g"][1] == pytest.approx(lic, abs=0.01)


def test_inspect_draws_the_missing_image_and_advises_a_repeat(
    run_json: Run, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    study = make_coarse(tmp_path / "study")
    places: set[float] = set()
    edit(study.images, lambda d: places.add(float(d.ImagePositionPatient[2])))
    lost = max(places)
    n_removed = edit(
        study.images,
        lambda d: not (float(d.EchoTime) == 4.6 and float(d.ImagePositionPatient[2]) == lost),
    )
    assert n_removed == 1
    status, document = run_json("inspect", study.images)
    assert status == 3
    assert document["verdict"] == "repeat"
    (stack,) = document["stacks"]
    rows = stack["completeness"]
    assert len(rows) == 12
    # Echo times 1.0, 2.2, 3.4, 4.6: the fourth row lacks one of four slices.
    assert [row.count(".") for row in rows] == [0, 0, 0, 1, 0, 0, 0, 0, 0, 0, 0, 0]
    assert main(["inspect", str(study.images)]) == 3
    captured = capsys.readouterr()
    assert rows[3] in captured.out
    assert captured.out.splitlines()[-1].startswith("repeat")


def test_run_shows_the_lic_last(
    clean_study: MadeStudy, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    call = ["run", str(clean_study.images), "--regions", str(clean_study.labels)]
    assert main([*call, "--out", str(tmp_path)]) == 0
    *lines, last = capsys.readouterr().out.splitlines()
    (folder,) = [path for path in tmp_path.iterdir() if re.fullmatch("[0-9a-f]{16}", path.name)]
    document = json.loads((folder / "result.json").read_bytes())
    lic = document["regions"][0]["lic_mg_per_g"]
    assert f"LIC {lic['value']:.2f} mg Fe per g dry weight" in last
    assert f"({lic['low']:.2f} to {lic['high']:.2f})" in last
    assert "hernando2023_1p5" in last
    assert any("Not a medical device" in line for line in lines)
    assert any(str(folder / "report.pdf") in line for line in lines)


def test_a_refusal_is_said_last(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    study = make_coarse(tmp_path / "study")
    edit(study.images, set_tag("ScanningSequence", "SE"))
    assert main(["run", str(study.images), "--out", str(tmp_path / "out")]) == 3
    last = capsys.readouterr().err.splitlines()[-1]
    assert last.startswith("Refused")
    assert "0018,0020" in last


def test_verify_finds_any_difference(
    run_json: Run, clean_study: MadeStudy, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out = tmp_path / "out"
    run_json("run", clean_study.images, "--regions", clean_study.labels, "--out", out)
    (folder,) = out.iterdir()
    assert run_json("verify", folder)[0] == 0
    assert run_json("verify", out)[0] == 0
    shutil.copytree(out, tmp_path / "kept")
    for number, damage in enumerate(
        [
            lambda f: (f / "result.json").write_bytes((f / "result.json").read_bytes() + b" "),
            lambda f: (f / "report.pdf").unlink(),
            lambda f: (f / "extra.txt").write_text("x", encoding="ascii"),
            lambda f: (f / "manifest.json").unlink(),
        ]
    ):
        place = tmp_path / f"damaged{number}"
        shutil.copytree(tmp_path / "kept", place)
        damage(place / folder.name)
        status, document = run_json("verify", place)
        assert status == 3
        assert document["differences"]
        assert main(["verify", str(place)]) == 3
        assert capsys.readouterr().err


def test_curves_lists_what_ships_and_a_sites_own(
    run_json: Run, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    own = tmp_path / "own.toml"
    own.write_text(OWN_CURVE, encoding="utf-8")
    status, document = run_json("curves", "--curve-file", own)
    assert status == 0
    by_key = {curve["key"]: curve for curve in document["curves"]}
    # DOI 10.1148/radiol.213256 by its abstract: LIC = -0.16 + 2.603e-2 R2* at 1.5 T.
    assert by_key["hernando2023_1p5"]["coefficients"] == [0.02603, -0.16]
    assert by_key["house_2031"]["local"] is True
    assert "pmc8528353" in [bands["key"] for bands in document["band_sets"]]
    assert main(["curves", "--curve-file", str(own)]) == 0
    out = capsys.readouterr().out
    for key in by_key:
        assert key in out
    assert "LOCAL" in out


def test_phantom_makes_what_it_lists(run_json: Run, tmp_path: Path) -> None:
    status, document = run_json("phantom", "list")
    assert status == 0
    assert {"demo-thalassaemia-1p5t", "two-echoes"} <= {r["name"] for r in document["recipes"]}
    call = ("phantom", "make", "two-echoes", "--format", "nifti", "--seed", "5")
    status, document = run_json(*call, "--out", tmp_path / "one")
    assert status == 0
    assert Path(document["labels"]).is_file()
    run_json(*call, "--out", tmp_path / "two")
    images = [sorted((tmp_path / name / "images").iterdir()) for name in ("one", "two")]
    assert [p.name for p in images[0]] == [p.name for p in images[1]]
    assert [p.read_bytes() for p in images[0]] == [p.read_bytes() for p in images[1]]


def on_a_terminal(repository: Path, **variables: str) -> bytes:
    """What `phantom list` writes to a terminal."""
    pty = pytest.importorskip("pty", reason="terminals are POSIX's")
    program = "import sys; from liverfe.cli import main; sys.exit(main(['phantom', 'list']))"
    ours, theirs = pty.openpty()
    kept = {k: v for k, v in os.environ.items() if k not in ("NO_COLOR", "FORCE_COLOR", "TERM")}
    with subprocess.Popen(
        [sys.executable, "-c", program],
        cwd=repository,
        env={**kept, **variables},
        stdout=theirs,
        stderr=theirs,
    ) as process:
        os.close(theirs)
        shown = b""
        while True:
            try:
                part = os.read(ours, 65536)
            except OSError:  # how Linux says that the other end is closed
                break
            if not part:
                break
            shown += part
    os.close(ours)
    assert process.returncode == 0
    assert b"two-echoes" in shown
    return shown


def test_a_terminal_without_colour_or_motion_is_obeyed(repository: Path) -> None:
    assert b"\x1b[" in on_a_terminal(repository, TERM="xterm-256color")
    # no-color.org asks for no colour; bold may stay. SGR 30 to 49 and 90 to 107 are colours.
    plain = on_a_terminal(repository, TERM="xterm-256color", NO_COLOR="1")
    assert not re.search(rb"\x1b\[[\d;]*\b(3\d|4\d|9\d|10[0-7])\b[\d;]*m", plain)
    assert b"\x1b" not in on_a_terminal(repository, TERM="dumb")


def test_settings_are_told_with_their_origin(
    run_json: Run, clean_study: MadeStudy, monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    (tmp_path / "liverfe.toml").write_text('curve = "garbowski2014"\n', encoding="utf-8")
    _, document = run_json("inspect", clean_study.images)
    told: dict[str, Any] = document["settings"]["curve"]
    assert told["value"] == "garbowski2014"
    assert "liverfe.toml" in told["origin"]
    assert document["stacks"][0]["curve"]["key"] == "garbowski2014"
    monkeypatch.setenv("LIVERFE_CURVE", "hernando2023_1p5")
    _, document = run_json("inspect", clean_study.images)
    assert document["stacks"][0]["curve"]["key"] == "hernando2023_1p5"


@pytest.mark.slow
def test_batch_ends_with_4_where_a_study_is_refused(run_json: Run, tmp_path: Path) -> None:
    root = tmp_path / "root"
    make_coarse(root / "good", seed=3)
    bad = make_coarse(root / "bad", seed=4)
    call = ("batch", root, "--out", tmp_path / "out", "--workers", "1")
    status, document = run_json(*call)
    assert (status, document["exit_status"]) == (0, 0)
    edit(bad.images, set_tag("ScanningSequence", "SE"))
    status, document = run_json(*call)
    assert status == 4
    assert [row["outcome"] for row in document["rows"]].count("refused") == 1
    assert run_json(*call, "--dry-run")[0] == 0


def test_inspect_says_on_the_screen_what_was_left_out_and_why(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    made = make_coarse(tmp_path / "study", layout="with-phase")
    assert main(["inspect", str(made.folder / "images")]) == 0
    said = " ".join(capsys.readouterr().out.split())
    # 12 echoes of 4 slices: as many phase images as magnitude images.
    assert "48 files" in said
    assert "phase" in said
