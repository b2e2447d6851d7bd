"""The benchmark runs, tiny, on every test run; full size by ``scripts/bench``."""

from __future__ import annotations

import importlib.machinery
import importlib.util
import json
import subprocess
import sys
from pathlib import Path
from types import ModuleType

import pytest

LIVERFE = [sys.executable, "-c", "from liverfe.cli import main; raise SystemExit(main())"]


@pytest.fixture(scope="module")
def bench(repository: Path) -> ModuleType:
    """`scripts/bench` as a module."""
    loader = importlib.machinery.SourceFileLoader("bench", str(repository / "scripts" / "bench"))
    spec = importlib.util.spec_from_loader("bench", loader)
    assert spec is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules["bench"] = module  # dataclasses look their module up
    loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def tiny_recipe(repository: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The full-size recipe, on a coarse grid of few slices."""
    text = (repository / "phantoms" / "bench-24-slices.toml").read_text(encoding="utf-8")
    for full, tiny in {
        "columns = 256": "columns = 96",
        "rows = 192": "rows = 72",
        "slices = 24": "slices = 6",
        "pixel_size_mm = [1.5, 1.5]": "pixel_size_mm = [4.0, 4.0]",
        "slice_thickness_mm = 5.0": "slice_thickness_mm = 20.0",
        "slice_spacing_mm = 5.0": "slice_spacing_mm = 20.0",
    }.items():
        assert text.count(full) == 1
        text = text.replace(full, tiny)
    path = tmp_path_factory.mktemp("bench") / "bench-tiny.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_the_full_size_is_the_one_that_was_promised(repository: Path) -> None:
    # 24 slices of 192 x 256 with 12 echoes are 288 files.
    text = (repository / "phantoms" / "bench-24-slices.toml").read_text(encoding="utf-8")
    for line in ("rows = 192", "columns = 256", "slices = 24", "count = 12"):
        assert f"\n{line}\n" in text


@pytest.mark.bench
def test_both_programs_run_in_turns_and_are_measured(
    bench: ModuleType, tiny_recipe: Path, tmp_path: Path
) -> None:
    result = bench.measure_pairs(
        sys.executable, LIVERFE, recipe=str(tiny_recipe), n_pairs=1, folder=tmp_path
    )
    for name in ("naive", "liverfe"):
        assert len(result["seconds"][name]) == 1
        assert 0.1 < result["seconds"][name][0] < 120
        assert result["peak_mib"][name] is None or 50 < result["peak_mib"][name] < 4000
    row = bench.whole_run_row(result)
    assert json.loads(json.dumps(row)) == row
    assert row["key"] in bench.table([row])


@pytest.mark.parametrize(
    ("ratio", "peak", "reached"),
    [(1.29, 699, True), (1.31, 400, False), (0.9, 701, False), (1.0, None, True)],
)
def test_the_whole_run_keeps_to_what_was_asked(
    ratio: float, peak: float | None, reached: bool, bench: ModuleType
) -> None:
    row = bench.whole_run_row(
        {
            "recipe": "r",
            "n_pairs": 5,
            "median_seconds": {"naive": 10.0, "liverfe": 10.0 * ratio},
            "peak_mib": {"naive": 300.0, "liverfe": peak},
            "times_as_long": ratio,
        }
    )
    assert row["reached"] is reached
    assert ("MISSED" in bench.table([row])) is not reached


def test_the_table_tells_missed_and_proven_cells_and_no_others(bench: ModuleType) -> None:
    def cell(where: str, *, reached: bool, note: str = "") -> dict[str, object]:
        return {"where": where, "text": "1.06", "reached": reached, "note": note}

    cells = [
        cell("plain", reached=True),
        cell("excused", reached=True, note="at least 1.06 (Neyman-Pearson)"),
        cell("short", reached=False, note="why"),
    ]
    row = {
        "key": "rmse", "what": "w", "asked": "at most 1.05", "measured": "1.06", "reached": False,
        "remarks": ["a remark"], "cells": cells,
    }  # fmt: skip
    shown = bench.table([row])
    assert "at most 1.05 | 1.06" in shown
    assert "proven: excused: 1.06" in shown
    assert "MISSED: short: 1.06 (why)" in shown
    assert "plain" not in shown
    assert "a remark" in shown


def test_the_table_has_the_rows_of_the_statistics_and_the_whole_run(bench: ModuleType) -> None:
    from tests.statistics.table import KEYS

    assert bench.ROWS == (*bench.SCIENCE, *bench.COST, bench.WHOLE_RUN)
    assert sorted(bench.ROWS[:-1]) == sorted(KEYS)
    assert set(bench.EVERY_DAY) < set(bench.ROWS)


@pytest.mark.parametrize(("reached", "status"), [(True, 0), (False, 1)])
def test_a_missed_row_makes_the_command_fail(
    reached: bool,
    status: int,
    bench: ModuleType,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    row = {"key": "limit", "what": "w", "asked": "a", "measured": "m", "remarks": [], "cells": []}
    asked: list[list[str]] = []

    def measured(python: str, keys: list[str]) -> list[dict[str, object]]:
        asked.append(keys)
        return [{**row, "reached": reached}]

    monkeypatch.setattr(bench.environment, "ready", lambda part: sys.executable)
    monkeypatch.setattr(bench, "measure_statistics", measured)
    monkeypatch.setattr(sys, "argv", ["bench", "--only", "limit", "--json"])
    assert bench.main() == status
    assert asked == [["limit"]]
    assert json.loads(capsys.readouterr().out)["reached"] is reached


@pytest.mark.bench
def test_the_statistics_are_measured_in_a_process_of_their_own(bench: ModuleType) -> None:
    rows = bench.measure_statistics(sys.executable, ["memory"], cut=True)
    assert [row["key"] for row in rows] == ["memory"]
    assert rows[0]["cells"][0]["measured"] > 0.1
    assert bench.measure_statistics(sys.executable, []) == []


@pytest.mark.bench
def test_the_naive_script_is_a_fair_opponent(
    repository: Path, tiny_recipe: Path, tmp_path: Path
) -> None:
    # A log-linear fit at this iron and SNR is biased by the noise floor, but it does measure.
    study = tmp_path / "study"
    make = [*LIVERFE, "phantom", "make", str(tiny_recipe), "--out", str(study)]
    subprocess.run(make, cwd=repository, check=True, capture_output=True)
    script = repository / "tests" / "bench" / "naive.py"
    regions = study / "regions" / "phantom_regions.nii.gz"
    arguments = [str(study / "images"), str(regions), str(tmp_path / "out")]
    done = subprocess.run(
        [sys.executable, str(script), *arguments], capture_output=True, text=True, check=True
    )
    measured = dict(line.split() for line in done.stdout.splitlines())
    truth = json.loads((study / "truth" / "truth.json").read_text(encoding="utf-8"))["regions"]
    for region in truth:
        true = region["r2star_per_s"]["median"]
        assert float(measured[str(region["label"])]) == pytest.approx(true, rel=0.15), region[
            "name"
        ]
    assert len(list((tmp_path / "out").glob("*.nii.gz"))) == 7
    assert (tmp_path / "out" / "report.pdf").stat().st_size > 10_000
