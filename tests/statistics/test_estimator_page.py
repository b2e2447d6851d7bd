"""The page on the estimators says what its script finds today."""

from __future__ import annotations

import importlib.util
import re
import sys
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest

from liverfe.fit import ESTIMATORS


@pytest.fixture(scope="module")
def script(repository: Path) -> ModuleType:
    """`scripts/estimator_page.py` as a module."""
    path = repository / "scripts" / "estimator_page.py"
    spec = importlib.util.spec_from_file_location("estimator_page", path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules["estimator_page"] = module  # dataclasses look their module up
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def page(script: ModuleType) -> str:
    text: str = script.PAGE.read_text(encoding="utf-8")
    return text


def cells(block: str) -> dict[str, list[str]]:
    """The rows of a Markdown table by their first cell."""
    lines = [line.strip("| ").split(" | ") for line in block.splitlines() if " | " in line]
    return {line[0].strip(): line[1:] for line in lines}


@pytest.mark.parametrize(("snr", "rate"), [(20, 300), (50, 800)])
def test_its_numbers_are_made_again(script: ModuleType, page: str, snr: int, rate: int) -> None:
    """Each cell has its own seed; the last digit may differ from machine to machine."""
    shown = cells(script.block_of(page, f"numbers at SNR {snr}"))
    column = script.TABLE_RATES_PER_S.index(rate)
    for estimator in ESTIMATORS:
        told, found = shown[estimator][column], script.row(estimator, snr, (rate,))[0]
        if "-" in (told.split(" / ")[1], found.split(" / ")[1]):
            assert told.split(" / ")[1] == found.split(" / ")[1], estimator
            continue
        then, now = (np.array([float(x) for x in text.split(" / ")]) for text in (told, found))
        assert np.abs(then - now).max() < 0.101, (estimator, told, found)


def test_its_tables_have_every_estimator(script: ModuleType, page: str) -> None:
    for snr in script.SNRS:
        shown = cells(script.block_of(page, f"numbers at SNR {snr}"))
        assert list(shown)[1:] == list(ESTIMATORS)


def test_its_figures_are_there_small_and_without_a_date(
    script: ModuleType, page: str, repository: Path
) -> None:
    named = re.findall(r"\]\(figures/([\w-]+)\.svg\)", page)
    assert sorted(named) == sorted(script.DRAWINGS)
    for name in named:
        text = (repository / f"docs/explanation/figures/{name}.svg").read_text(encoding="utf-8")
        assert len(text) < 200_000
        assert "<dc:date>" not in text


def test_a_figure_comes_out_the_same_again(
    script: ModuleType, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(script, "ESTIMATORS", (*ESTIMATORS[:1], "least-squares"))
    monkeypatch.setattr(script, "RATES_PER_S", (300, 800))
    monkeypatch.setattr(script, "DRAWINGS", {"estimator-bias": script.draw_bias})
    for folder in ("one", "two"):
        script.draw_all(tmp_path / folder)
    one, two = (tmp_path / folder / "estimator-bias.svg" for folder in ("one", "two"))
    assert one.read_bytes() == two.read_bytes()
    assert len(one.read_bytes()) > 5000


def test_what_was_reached_is_told_row_by_row(
    script: ModuleType, page: str, repository: Path
) -> None:
    rows = re.search(
        r"^SCIENCE = (\(.*?\))\nCOST = (\(.*?\))\n",
        (repository / "scripts" / "bench").read_text(encoding="utf-8"),
        re.MULTILINE | re.DOTALL,
    )
    assert rows is not None
    block = script.block_of(page, "reached")
    for key in (*re.findall(r'"([\w-]+)"', rows[1] + rows[2]), "whole-run"):
        assert f"\n- `{key}`: " in block, key
    assert len(cells(script.block_of(page, "coverage"))) == 1 + 4
    assert len(cells(script.block_of(page, "sigma"))) == 1 + 3


def test_blocks_are_filled_between_their_marks(script: ModuleType) -> None:
    marks = ("<!-- a: made by scripts/estimator_page.py -->", "<!-- a: end -->")
    filled = script.fill(f"before\n\n{marks[0]}\n\nold\n\n{marks[1]}\nafter", "a", "new\nlines")
    assert filled == f"before\n\n{marks[0]}\n\nnew\nlines\n\n{marks[1]}\nafter"
    assert script.block_of(filled, "a") == "new\nlines"
