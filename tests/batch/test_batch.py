"""A batch: every study keeps its row, one bad one stops nobody, and running again goes on."""

from __future__ import annotations

import csv
import json
import os
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import pytest

from liverfe.batch import plan_batch, run_batch
from liverfe.errors import UsageError
from liverfe.export import lock_folder, verify_folder
from liverfe.journey import Settings, resolve_settings
from tests.journey.scans import TRUE_LIC_MG_PER_G, edit, make_coarse, set_tag


def make_root(root: Path) -> Path:
    """Six studies: two good, a repeat, one of two folders, one spin echo, one of damaged files."""
    make_coarse(root / "good", seed=11)
    make_coarse(root / "twice", seed=12, layout="repeats")
    apart = make_coarse(root / "apart", seed=13, layout="series-per-echo")
    shutil.rmtree(apart.folder / "truth")
    series = sorted(p for p in apart.images.iterdir() if p.is_dir())
    assert len(series) == 12
    (root / "elsewhere").mkdir()
    for folder in series[6:]:
        shutil.move(folder, root / "elsewhere" / folder.name)
    spin = make_coarse(root / "spin", seed=14)
    edit(spin.images, set_tag("ScanningSequence", "SE"))
    damaged = root / "damaged"
    damaged.mkdir()
    some = next(p for p in spin.images.rglob("*") if p.is_file())
    (damaged / "a").write_bytes(some.read_bytes()[:700])
    (root / "notes").mkdir()
    (root / "notes" / "readme.txt").write_text("no study", encoding="ascii")
    return root


@pytest.fixture(scope="module")
def root(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return make_root(tmp_path_factory.mktemp("studies") / "root")


@pytest.fixture(scope="module")
def done(
    root: Path, tmp_path_factory: pytest.TempPathFactory
) -> tuple[dict[str, Any], Path, Settings]:
    """One batch over the root; what it gave, where its results lie, and its settings."""
    place = tmp_path_factory.mktemp("done")
    os.environ["LIVERFE_CONFIG_DIR"] = str(place / "configuration")
    try:
        settings = resolve_settings({"workers": 2})
        return run_batch(root, place / "out", settings=settings), place / "out", settings
    finally:
        del os.environ["LIVERFE_CONFIG_DIR"]


def rows_of(out: Path) -> list[dict[str, str]]:
    with (out / "summary.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def test_every_study_has_its_row_and_one_row(done: tuple[dict[str, Any], Path, Settings]) -> None:
    document, out, _ = done
    rows = rows_of(out)
    outcomes = sorted(row["outcome"] for row in rows)
    # good, twice (two stacks), apart (one study in two folders); spin echo and damaged refused.
    assert outcomes == ["refused", "refused", "reported", "reported", "reported", "reported"]
    assert len({row["key"] for row in rows}) == 6
    assert [row["key"] for row in rows] == sorted(row["key"] for row in rows)
    assert [row["key"] for row in document["rows"]] == [row["key"] for row in rows]
    assert document["exit_status"] == 4


def test_what_is_good_is_measured_beside_what_is_bad(
    done: tuple[dict[str, Any], Path, Settings],
) -> None:
    _, out, _ = done
    good = [row for row in rows_of(out) if row["outcome"] == "reported"]
    for row in good:
        assert float(row["lic_mg_per_g"]) == pytest.approx(TRUE_LIC_MG_PER_G, rel=0.02)
        document = json.loads((out / row["key"] / "result.json").read_bytes())
        assert len(document["stack"]["echo_times_ms"]) == 12
    assert sum(row["key"].endswith("-2") for row in good) == 1
    assert verify_folder(out) == ()


def test_a_refused_study_says_why_in_words(done: tuple[dict[str, Any], Path, Settings]) -> None:
    document, out, _ = done
    refused = [row for row in rows_of(out) if row["outcome"] == "refused"]
    assert any("spin" in row["reason"].lower() for row in refused)
    for row in refused:
        assert row["lic_mg_per_g"] == row["r2star_per_s"] == ""
        assert (out / row["key"] / "report.pdf").is_file()
    # The worst stands first.
    assert {line.split(":")[0] for line in document["to_look_at"][:2]} == {
        row["key"] for row in refused
    }


def test_running_again_measures_nothing_again(
    done: tuple[dict[str, Any], Path, Settings],
    root: Path,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    first, out, settings = done
    monkeypatch.setenv("LIVERFE_CONFIG_DIR", str(out.parent / "configuration"))
    victim = next(row["key"] for row in rows_of(out) if row["outcome"] == "reported")
    stamps = {
        path.name: path.stat().st_mtime_ns
        for path in out.iterdir()
        if path.is_dir() and path.name != victim
    }
    shutil.rmtree(out / victim / "maps")
    again = run_batch(root, out, settings=settings)
    assert again["rows"] == first["rows"]
    # Four stacks were measured; the damaged one is not taken as done.
    assert (first["n_done_before"], again["n_done_before"]) == (0, 3)
    assert {name: (out / name).stat().st_mtime_ns for name in stamps} == stamps
    # What was damaged is made anew, and the damaged one is kept aside.
    assert (out / victim / "maps").is_dir()
    assert (out / f"{victim}.v1").is_dir()


def test_a_dry_run_tells_all_and_writes_nothing(
    root: Path, settings: Settings, tmp_path: Path
) -> None:
    out = tmp_path / "out"
    before = sorted(tmp_path.rglob("*"))
    plan = plan_batch(root, out, settings=settings)
    assert sorted(tmp_path.rglob("*")) == before
    assert len(plan["studies"]) == 6
    measured = [study for study in plan["studies"] if study["outcome"] == "measure"]
    assert len(measured) == 4
    for study in measured:
        assert study["key"] is None
        # The recipe: 12 echoes from 1.0 ms by 1.2 ms, 4 slices, 1.5 T.
        assert study["echo_times_ms"] == pytest.approx([1.0 + 1.2 * k for k in range(12)])
        assert (study["n_images"], study["n_images_expected"]) == (48, 48)
        assert study["field_strength_t"] == 1.5
        assert study["curve"] == "hernando2023_1p5"
        assert study["n_region_files"] == 2
    refused = [study for study in plan["studies"] if study["outcome"] == "refused"]
    assert all(study["reason"] for study in refused)
    assert plan["expected_seconds"] > 0
    assert 0 < plan["expected_bytes"] < plan["free_bytes"]


def test_a_second_batch_in_the_same_folder_is_refused(
    root: Path, settings: Settings, tmp_path: Path
) -> None:
    out = tmp_path / "out"
    out.mkdir()
    with lock_folder(out / "batch"), pytest.raises(UsageError, match=str(os.getpid())):
        run_batch(root, out, settings=settings)
    assert not (out / "summary.csv").exists()


@pytest.mark.parametrize("name", ["nowhere", "empty"])
def test_a_root_without_studies_is_a_wrong_call(
    settings: Settings, tmp_path: Path, name: str
) -> None:
    (tmp_path / "empty").mkdir()
    with pytest.raises(UsageError):
        run_batch(tmp_path / name, tmp_path / "out", settings=settings)


def test_a_batch_that_would_fill_the_disk_does_not_start(
    root: Path, settings: Settings, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("liverfe.batch.work.free_bytes", lambda folder: 1000)
    with pytest.raises(UsageError, match="Make room"):
        run_batch(root, tmp_path / "out", settings=settings)
    assert not [p for p in (tmp_path / "out").iterdir() if p.is_dir()]


@pytest.mark.slow
@pytest.mark.skipif(os.name != "posix", reason="sends the signal that Ctrl-C sends")
def test_an_interrupt_answers_at_once_and_leaves_no_half_folder(
    root: Path, tmp_path: Path, repository: Path, own_configuration: Path
) -> None:
    out = tmp_path / "out"
    program = "import sys; from liverfe.cli import main; sys.exit(main())"
    process = subprocess.Popen(
        [sys.executable, "-c", program, "batch", str(root), "--out", str(out), "--workers", "2"],
        cwd=repository,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        start_new_session=True,
    )
    deadline = time.monotonic() + 120
    while not (out / "summary.csv").exists():
        assert time.monotonic() < deadline
        assert process.poll() is None
        time.sleep(0.05)
    waiting = rows_of(out)
    assert len(waiting) == 6
    assert {row["outcome"] for row in waiting} == {"waiting"}
    time.sleep(0.5)
    os.killpg(process.pid, signal.SIGINT)  # as a terminal does: to the whole group
    sent = time.monotonic()
    _, said = process.communicate(timeout=60)
    assert process.returncode == 130
    assert time.monotonic() - sent < 10
    assert b"Traceback" not in said
    assert b"run the same command again" in said
    left = {path.name for path in out.iterdir()}
    assert not {name for name in left if name.endswith((".part", ".lock"))}
    assert verify_folder(out) == () if any(p.is_dir() for p in out.iterdir()) else True
