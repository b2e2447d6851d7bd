"""What ``pip install .`` brings is whole: the wheel alone, away from the checkout, works."""

from __future__ import annotations

import os
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

from tests.architecture.tree import project_files

HEAVY = {"gdcm", "matplotlib", "nibabel", "numba", "pydicom", "scipy", "skimage", "typst"}


@pytest.fixture(scope="module")
def unpacked(repository: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The wheel of this checkout, built without network and unpacked."""
    folder = tmp_path_factory.mktemp("wheel")
    subprocess.run(
        [sys.executable, "-m", "hatchling", "build", "-t", "wheel", "-d", str(folder)],
        cwd=repository,
        check=True,
        capture_output=True,
    )
    (wheel,) = folder.glob("liverfe-*.whl")
    with zipfile.ZipFile(wheel) as archive:
        archive.extractall(folder / "unpacked")
    return folder / "unpacked"


def test_every_file_of_the_package_and_every_recipe_is_in_the_wheel(
    unpacked: Path, repository: Path
) -> None:
    brought = {path.relative_to(unpacked).as_posix() for path in unpacked.rglob("*")}
    names = project_files(repository)
    package = {name for name in names if name.startswith("liverfe/")}
    recipes = {
        name.replace("phantoms/", "liverfe/phantom/recipes/", 1)
        for name in names
        if name.startswith("phantoms/")
    }
    assert package | recipes <= brought
    assert recipes


def test_the_wheel_brings_the_package_its_licence_and_nothing_else(unpacked: Path) -> None:
    assert {path.name.split("-")[0] for path in unpacked.iterdir()} == {"liverfe"}
    (licence,) = unpacked.glob("*.dist-info/licenses/LICENSE")
    assert "Apache License" in licence.read_text(encoding="utf-8")


def run_away_from_home(code: str, unpacked: Path) -> str:
    return subprocess.run(
        [sys.executable, "-P", "-c", code],
        cwd=unpacked.parent,
        env={**os.environ, "PYTHONPATH": str(unpacked), "PYTHONUTF8": "1"},
        check=True,
        capture_output=True,
        encoding="utf-8",
    ).stdout


def test_the_unpacked_wheel_lists_its_recipes(unpacked: Path) -> None:
    code = "from liverfe.cli import main; raise SystemExit(main(['phantom', 'list', '--json']))"
    assert "demo-thalassaemia-1p5t" in run_away_from_home(code, unpacked)


def test_the_command_waits_with_heavy_imports(unpacked: Path) -> None:
    code = f"import sys, liverfe.cli; print(sorted({HEAVY} & set(sys.modules)))"
    assert run_away_from_home(code, unpacked).strip() == "[]"
