"""The README's two commands work where Python stands alone, and say plainly why they cannot."""

from __future__ import annotations

import ast
import json
import subprocess
import sys
from pathlib import Path
from types import ModuleType

import pytest

FIRST_COMMANDS = ("demo.py", "test.py", "check")


@pytest.fixture
def environment(repository: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> ModuleType:
    """`scripts/environment.py`, pointed at an empty folder and with its slow steps counted."""
    monkeypatch.syspath_prepend(str(repository / "scripts"))
    monkeypatch.delitem(sys.modules, "environment", raising=False)
    import environment as module

    venv = tmp_path / ".venv"
    monkeypatch.setattr(module, "VENV", venv)
    monkeypatch.setattr(module, "BIN", venv / "bin")
    monkeypatch.setattr(module, "RECORD", venv / "liverfe-environment.json")
    monkeypatch.setattr(module, "LOCK", tmp_path / "requirements.lock")
    module.LOCK.write_text(f"a==1\n{module.DEVELOP_MARK}b==2\n", encoding="utf-8")
    return module


@pytest.fixture
def steps(environment: ModuleType, monkeypatch: pytest.MonkeyPatch) -> list[str]:
    """What `environment.ready` did, in order."""
    done: list[str] = []

    def make_venv(part: str) -> None:
        done.append("venv")
        environment.BIN.mkdir(parents=True, exist_ok=True)
        (environment.BIN / f"python{environment.SUFFIX}").touch()

    monkeypatch.setattr(environment, "_make_venv", make_venv)
    monkeypatch.setattr(environment, "_install_packages", lambda _, part: done.append(part))
    monkeypatch.setattr(environment, "_install_project", lambda _: done.append("project"))
    return done


@pytest.mark.parametrize("name", FIRST_COMMANDS)
def test_an_old_python_can_read_the_first_commands_far_enough_to_say_so(
    name: str, repository: Path
) -> None:
    text = (repository / "scripts" / name).read_text(encoding="utf-8")
    tree = ast.parse(text, feature_version=(3, 7))
    check = next(i for i, node in enumerate(tree.body) if isinstance(node, ast.If))
    before = [node for node in tree.body[:check] if isinstance(node, ast.Import | ast.ImportFrom)]
    assert [ast.unparse(node) for node in before] == ["import sys"]


@pytest.mark.parametrize("name", FIRST_COMMANDS)
@pytest.mark.parametrize("version", [(3, 10, 13), (3, 15, 0)])
def test_another_python_gets_a_sentence(
    name: str, version: tuple[int, int, int], repository: Path
) -> None:
    code = (
        f"import runpy, sys; sys.version_info = {version}; "
        f"runpy.run_path({str(repository / 'scripts' / name)!r}, run_name='__main__')"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 1
    assert "needs Python 3.11 to 3.14" in done.stderr
    assert "Traceback" not in done.stderr


@pytest.mark.parametrize("name", [*FIRST_COMMANDS, "environment.py"])
def test_the_first_commands_import_the_standard_library_alone(name: str, repository: Path) -> None:
    tree = ast.parse((repository / "scripts" / name).read_text(encoding="utf-8"))
    imported = {
        alias.name for n in ast.walk(tree) if isinstance(n, ast.Import) for alias in n.names
    }
    imported |= {n.module or "" for n in ast.walk(tree) if isinstance(n, ast.ImportFrom)}
    others = {name.split(".")[0] for name in imported} - set(sys.stdlib_module_names)
    assert others <= {"environment"}


def test_a_fresh_machine_gets_everything_and_a_second_run_nothing(
    environment: ModuleType, steps: list[str]
) -> None:
    environment.ready("run")
    assert steps == ["venv", "run", "project"]
    environment.ready("run")
    assert steps == ["venv", "run", "project"]


def test_the_tests_add_their_packages_and_the_demo_then_needs_nothing(
    environment: ModuleType, steps: list[str]
) -> None:
    environment.ready("run")
    steps.clear()
    environment.ready("develop")
    assert steps == ["develop", "project"]
    steps.clear()
    environment.ready("run")
    environment.ready("develop")
    assert steps == []


def test_a_changed_lock_makes_all_anew(environment: ModuleType, steps: list[str]) -> None:
    environment.ready("develop")
    steps.clear()
    environment.LOCK.write_text("a==2\n", encoding="utf-8")
    environment.ready("run")
    assert steps == ["venv", "run", "project"]


@pytest.mark.parametrize("line", ["python", "place", "machine"])
def test_another_python_or_place_makes_all_anew(
    line: str, environment: ModuleType, steps: list[str]
) -> None:
    environment.ready("run")
    record = json.loads(environment.RECORD.read_text(encoding="utf-8"))
    environment.RECORD.write_text(json.dumps({**record, line: "other"}), encoding="utf-8")
    steps.clear()
    environment.ready("run")
    assert steps == ["venv", "run", "project"]


def test_changed_settings_install_the_project_alone(
    environment: ModuleType, steps: list[str]
) -> None:
    environment.ready("develop")
    record = json.loads(environment.RECORD.read_text(encoding="utf-8"))
    environment.RECORD.write_text(json.dumps({**record, "project": "old"}), encoding="utf-8")
    steps.clear()
    environment.ready("run")
    assert steps == ["project"]
    environment.ready("develop")  # its packages are still known to be there
    assert steps == ["project"]


def test_an_install_cut_short_is_made_anew(
    environment: ModuleType, steps: list[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(*_: object) -> None:
        raise environment.SetupFailed("the network went down")

    with monkeypatch.context() as patch:
        patch.setattr(environment, "_install_packages", fail)
        with pytest.raises(environment.SetupFailed):
            environment.ready("run")
    steps.clear()
    environment.ready("run")
    assert steps == ["venv", "run", "project"]


@pytest.mark.parametrize(
    ("tool_says", "person_reads"),
    [
        ("ERROR: Could not install: [Errno 28] No space left on device", "disk is full"),
        ("WARNING: Retrying after connection broken by 'NewConnectionError'", "Check the network"),
        ("THESE PACKAGES DO NOT MATCH THE HASHES FROM THE REQUIREMENTS FILE", "Do not use it"),
        ("ERROR: No matching distribution found for numba==0.68.1", "not built for Python"),
        ("Segmentation fault", "pip failed"),
    ],
)
def test_what_a_tool_says_becomes_a_sentence(
    tool_says: str, person_reads: str, environment: ModuleType
) -> None:
    text = environment._why(["Collecting numba", tool_says], "pip failed")
    assert person_reads in text.splitlines()[0]
    assert tool_says in text


def test_a_disk_too_small_is_told_before_anything_is_made(
    environment: ModuleType, monkeypatch: pytest.MonkeyPatch
) -> None:
    usage = environment.shutil.disk_usage(environment.ROOT)._replace(free=10**8)
    monkeypatch.setattr(environment.shutil, "disk_usage", lambda _: usage)
    with pytest.raises(environment.SetupFailed, match=r"0\.1 GB free"):
        environment.ready("run")
    assert not environment.VENV.exists()


def test_a_python_without_ensurepip_is_told_what_to_install(
    environment: ModuleType, monkeypatch: pytest.MonkeyPatch
) -> None:
    # The words of Debian's venv module where its other half is not installed.
    words = "The virtual environment was not created successfully because ensurepip is not"
    failed = subprocess.CompletedProcess(["venv"], 1, stdout=words, stderr="")
    monkeypatch.setattr(environment.subprocess, "run", lambda *_, **__: failed)
    with pytest.raises(environment.SetupFailed, match=r"apt install python3\.\d+-venv"):
        environment.ready("run")
