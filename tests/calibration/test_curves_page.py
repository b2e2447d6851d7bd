"""The reference page shows the curves that ship."""

from __future__ import annotations

import importlib.util
from pathlib import Path
from types import ModuleType

import pytest

from liverfe.calibration import band_sets, published_curves


@pytest.fixture
def script(repository: Path) -> ModuleType:
    spec = importlib.util.spec_from_file_location(
        "curves_page", repository / "scripts" / "curves_page.py"
    )
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_the_page_in_the_repository_is_up_to_date(script: ModuleType) -> None:
    assert script.main(["--check"]) == 0


def test_the_check_sees_a_page_that_was_edited_by_hand(
    script: ModuleType, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    edited = tmp_path / "curves.md"
    monkeypatch.setattr(script, "PAGE", edited)
    assert script.main(["--check"]) == 1
    assert script.main([]) == 0
    assert script.main(["--check"]) == 0
    edited.write_text(edited.read_text("utf-8").replace("0.0254", "0.0245"), "utf-8")
    assert script.main(["--check"]) == 1


def test_the_page_names_every_curve_and_set(script: ModuleType) -> None:
    text = script.page()
    for entry in published_curves():
        assert f"### `{entry.key}`" in text
        assert entry.equation in text
        assert entry.evidence_note in text
    for bands in band_sets():
        assert f"### `{bands.key}`" in text
