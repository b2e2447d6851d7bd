"""A configuration folder of one's own for every test."""

from __future__ import annotations

from pathlib import Path

import pytest

from liverfe.journey import Settings, resolve_settings


@pytest.fixture(autouse=True)
def own_configuration(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Keep tests away from the user's secret and settings; workers inherit it."""
    folder = tmp_path / "configuration"
    monkeypatch.setenv("LIVERFE_CONFIG_DIR", str(folder))
    for name in ("CURVE", "BANDS", "METHOD", "IDENTITY", "WORKERS", "CURVE_FILE", "TIMEOUT_MIN"):
        monkeypatch.delenv(f"LIVERFE_{name}", raising=False)
    return folder


@pytest.fixture
def settings(own_configuration: Path) -> Settings:
    """Two workers, the house's method."""
    return resolve_settings({"workers": 2})
