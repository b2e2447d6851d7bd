"""A configuration folder of one's own for every test, and studies that several tests share."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from liverfe.cli import main
from liverfe.phantom import MadeStudy
from tests.journey.scans import make_coarse

Run = Callable[..., tuple[int, Any]]


@pytest.fixture(autouse=True)
def own_configuration(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Keep tests away from the user's secret and settings, and from the working folder."""
    folder = tmp_path / "configuration"
    monkeypatch.setenv("LIVERFE_CONFIG_DIR", str(folder))
    for name in ("CURVE", "BANDS", "METHOD", "IDENTITY", "WORKERS", "CURVE_FILE", "TIMEOUT_MIN"):
        monkeypatch.delenv(f"LIVERFE_{name}", raising=False)
    monkeypatch.chdir(tmp_path)
    return folder


@pytest.fixture(scope="session")
def clean_study(tmp_path_factory: pytest.TempPathFactory) -> MadeStudy:
    """A study with nothing wrong; tests only read it."""
    return make_coarse(tmp_path_factory.mktemp("clean") / "study")


@pytest.fixture
def run_json(capsys: pytest.CaptureFixture[str]) -> Run:
    """Call the program with ``--json``; gives status and the one document on standard output."""

    def run(*arguments: object) -> tuple[int, Any]:
        capsys.readouterr()
        status = main([*map(str, arguments), "--json"])
        out = capsys.readouterr().out
        # json.loads takes one document and nothing before or after it.
        return status, json.loads(out) if out else None

    return run
