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
        assert result["peak_gib"][name] is None or 0.05 < result["peak_gib"][name] < 4
    assert json.loads(json.dumps(result)) == result
    assert "times as long" in bench.table(result)


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


@pytest.mark.parametrize(
    ("times_as_long", "peak_gib", "kept"),
    [(2.4, 1.4, True), (2.6, 1.4, False), (2.4, 1.6, False), (2.4, None, True)],
)
def test_the_limits_are_held(
    times_as_long: float, peak_gib: float | None, kept: bool, bench: ModuleType
) -> None:
    result = {"times_as_long": times_as_long, "peak_gib": {"liverfe": peak_gib}}
    assert bench.within_limits(result) is kept
