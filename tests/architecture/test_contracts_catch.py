"""Each import contract of pyproject.toml was seen to fail on a package with one bad import."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

COMMAND = "from importlinter.cli import lint_imports_command; lint_imports_command()"


@pytest.fixture(scope="module")
def rooms(repository: Path) -> list[str]:
    """Every room that the order of the journey names."""
    text = (repository / "pyproject.toml").read_text(encoding="utf-8")
    contracts = tomllib.loads(text)["tool"]["importlinter"]["contracts"]
    layers = next(item["layers"] for item in contracts if item["type"] == "layers")
    return [room for layer in layers for room in layer.replace("|", " ").split()]


@pytest.fixture
def package(rooms: list[str], repository: Path, tmp_path: Path) -> Path:
    """An empty package with the rooms of this one, under this one's contracts."""
    shutil.copy(repository / "pyproject.toml", tmp_path)
    (tmp_path / "liverfe").mkdir()
    (tmp_path / "liverfe" / "__init__.py").touch()
    for room in rooms:
        (tmp_path / "liverfe" / f"{room}.py").touch()
    return tmp_path


def broken_contracts(package: Path) -> set[str]:
    done = subprocess.run(
        [sys.executable, "-c", COMMAND, "--no-cache", "--no-logo"],
        cwd=package,
        capture_output=True,
        encoding="utf-8",
        env={**os.environ, "PYTHONUTF8": "1", "NO_COLOR": "1", "COLUMNS": "200"},
        check=False,
    )
    lines = [line.strip() for line in done.stdout.splitlines()]
    broken = {line.removesuffix(" BROKEN") for line in lines if line.endswith(" BROKEN")}
    assert (done.returncode == 0) == (not broken and "Could not" not in done.stdout), done.stdout
    return broken or ({done.stdout} if done.returncode else set())


def test_an_innocent_package_keeps_every_contract(package: Path) -> None:
    (package / "liverfe" / "cli.py").write_text("import liverfe.journey\nimport typer\n")
    (package / "liverfe" / "calibration.py").write_text("import importlib.resources\n")
    assert broken_contracts(package) == set()


ORDER = "The rooms stand in the order of the journey"
PHANTOM = "The phantom does not borrow the science that it must test"
ACQUIRE = "Reading files does no science"
SHOWN = "Report and export read a result, not the scan"
MIDDLE = "The middle touches no file, screen, log or network"


@pytest.mark.parametrize(
    ("room", "line", "contract"),
    [
        ("fit", "import liverfe.maps", ORDER),
        ("study", "import liverfe.acquire", ORDER),
        ("report", "import liverfe.export", ORDER),
        ("journey", "import liverfe.batch", ORDER),
        ("attic", "", ORDER),
        ("phantom", "import liverfe.fit", PHANTOM),
        ("phantom", "import liverfe.noise", PHANTOM),
        ("acquire", "import liverfe.study", ACQUIRE),
        ("report", "import liverfe.acquire", SHOWN),
        ("export", "import liverfe.phantom", SHOWN),
        ("study", "import pathlib", MIDDLE),
        ("calibration", "from os import path", MIDDLE),
        ("fit", "import logging", MIDDLE),
        ("grid", "import nibabel", MIDDLE),
    ],
)
def test_a_bad_import_breaks_its_contract(
    room: str, line: str, contract: str, package: Path
) -> None:
    (package / "liverfe" / f"{room}.py").write_text(line + "\n")
    assert {name.split(" (")[0] for name in broken_contracts(package)} == {contract}
