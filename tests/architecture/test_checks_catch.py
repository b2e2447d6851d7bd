"""Each check of `scripts/check` was seen to fail: on a small project with one planted fault."""

from __future__ import annotations

import importlib.machinery
import importlib.util
import shutil
import sys
from pathlib import Path
from types import ModuleType

import pytest

SOUND = '''\
"""Halving, the whole of it."""

__all__ = ["halve"]


def halve(number: float) -> float:
    """Return half of `number`.

    Parameters
    ----------
    number : float
        Any number.

    Returns
    -------
    float
        Half of it.

    Examples
    --------
    >>> halve(3.0)
    1.5
    """
    return number / 2
'''
FAULTS = {
    "lint": ("liverfe/units.py", SOUND.replace('it."""\n', 'it."""\n\nimport json\n')),
    "format": ("liverfe/units.py", SOUND.replace("number / 2", "number/2")),
    "types": ("liverfe/units.py", SOUND.replace("-> float:", "-> str:")),
    "docstrings": ("liverfe/units.py", SOUND.replace("    number : float", "    count : float")),
    "dead-code": ("liverfe/units.py", SOUND + "\n\ndef _left_behind() -> None:\n    pass\n"),
    "dependencies": ("liverfe/errors.py", "import undeclared\n"),
    "examples": ("liverfe/units.py", SOUND.replace("    1.5", "    1.625")),
    "documents": ("docs/index.md", "# Small\n\nSee [a page](missing.md).\n"),
}


@pytest.fixture(scope="module")
def check(repository: Path) -> ModuleType:
    """`scripts/check` as a module."""
    loader = importlib.machinery.SourceFileLoader("check", str(repository / "scripts" / "check"))
    spec = importlib.util.spec_from_loader("check", loader)
    assert spec is not None
    module = importlib.util.module_from_spec(spec)
    loader.exec_module(module)
    return module


@pytest.fixture
def project(repository: Path, tmp_path: Path) -> Path:
    """A sound small project under this one's settings."""
    for folder in ("liverfe", "docs", "scripts", "tests"):
        (tmp_path / folder).mkdir()
    settings = (repository / "pyproject.toml").read_text(encoding="utf-8")
    # What ours depends on, the small one does not.
    head, tail = settings.split("dependencies = [", 1)
    settings = head + "dependencies = [\n]" + tail.split("\n]", 1)[1]
    (tmp_path / "pyproject.toml").write_text(settings, encoding="utf-8")
    (tmp_path / "liverfe" / "__init__.py").write_text('"""Small."""\n', encoding="utf-8")
    (tmp_path / "liverfe" / "units.py").write_text(SOUND, encoding="utf-8")
    (tmp_path / "tests" / "test_units.py").write_text(
        "from liverfe.units import halve\n\n\ndef test_it() -> None:\n    assert halve(2) == 1\n",
        encoding="utf-8",
    )
    shutil.copy(repository / "docs" / "conf.py", tmp_path / "docs")
    (tmp_path / "liverfe" / "references.bib").touch()
    for page in ("docs/index.md", "README.md", "DEVELOPERS.md"):
        (tmp_path / page).write_text("# Small\n\nA page.\n", encoding="utf-8")
    return tmp_path


def test_every_check_is_seen_to_fail(check: ModuleType) -> None:
    # The contracts have a file of their own, test_contracts_catch.py.
    assert set(check.CHECKS) == {*FAULTS, "contracts"}


@pytest.mark.slow
@pytest.mark.parametrize("name", FAULTS)
def test_the_check_passes_a_sound_project_and_finds_the_fault(
    name: str, check: ModuleType, project: Path
) -> None:
    sound = check.run_check(sys.executable, name, project)
    assert sound.returncode == 0, sound.stdout
    path, text = FAULTS[name]
    (project / path).write_text(text, encoding="utf-8")
    assert check.run_check(sys.executable, name, project).returncode != 0
