"""A configuration folder of one's own for every test, and a study that several tests share."""

from __future__ import annotations

from pathlib import Path

import pytest

from liverfe.phantom import MadeStudy
from tests.journey.scans import make_coarse


@pytest.fixture(autouse=True)
def own_configuration(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Keep tests away from the user's secret and settings."""
    folder = tmp_path / "configuration"
    monkeypatch.setenv("LIVERFE_CONFIG_DIR", str(folder))
    for name in ("CURVE", "BANDS", "METHOD", "IDENTITY", "WORKERS", "CURVE_FILE", "TIMEOUT_MIN"):
        monkeypatch.delenv(f"LIVERFE_{name}", raising=False)
    return folder


@pytest.fixture(scope="module")
def clean_study(tmp_path_factory: pytest.TempPathFactory) -> MadeStudy:
    """A study with nothing wrong; tests only read it."""
    return make_coarse(tmp_path_factory.mktemp("clean") / "study")
