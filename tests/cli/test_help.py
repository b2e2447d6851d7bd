"""Help begins with examples, and comes before anything heavy is imported."""

from __future__ import annotations

import re
import shlex
import subprocess
import sys
from pathlib import Path

import pytest

import liverfe
from liverfe.cli import main

COMMANDS = [
    (),
    ("inspect",),
    ("run",),
    ("batch",),
    ("curves",),
    ("verify",),
    ("phantom",),
    ("phantom", "make"),
    ("phantom", "list"),
]

HEAVY = (
    "numpy", "scipy", "numba", "matplotlib", "pydicom", "nibabel", "skimage", "typst", "rich",
)  # fmt: skip


def help_of(command: tuple[str, ...], capsys: pytest.CaptureFixture[str]) -> str:
    capsys.readouterr()
    assert main([*command, "--help"]) == 0
    captured = capsys.readouterr()
    assert captured.err == ""
    return captured.out


@pytest.mark.parametrize("command", COMMANDS, ids=" ".join)
def test_help_begins_with_examples_that_can_be_typed(
    command: tuple[str, ...], capsys: pytest.CaptureFixture[str]
) -> None:
    text = help_of(command, capsys)
    first, *rest = text.splitlines()
    assert first == "Examples:"
    examples = [line.strip() for line in rest if line.startswith("  liverfe ")]
    assert len(examples) >= 2
    assert text.index("Examples:") < text.index("Usage:")
    for example in examples:
        words = shlex.split(example)
        assert words[: len(command) + 1] == ["liverfe", *command]
        name = words[1:3] if words[1] == "phantom" else words[1:2]
        options = {word for word in words if word.startswith("--")}
        known = set(re.findall(r"--[a-z][\w-]*", help_of(tuple(name), capsys)))
        assert options <= known


@pytest.mark.parametrize("command", [c for c in COMMANDS if c not in ((), ("phantom",))])
def test_every_command_takes_json(
    command: tuple[str, ...], capsys: pytest.CaptureFixture[str]
) -> None:
    assert "--json" in help_of(command, capsys)


def test_the_command_line_imports_nothing_heavy(repository: Path) -> None:
    code = f"import sys, liverfe.cli; print([m for m in {HEAVY!r} if m in sys.modules])"
    ran = subprocess.run(
        [sys.executable, "-c", code], cwd=repository, capture_output=True, check=True, text=True
    )
    assert ran.stdout.strip() == "[]"


@pytest.mark.parametrize("option", ["--help", "--version"])
def test_help_and_version_need_little_time_of_the_processor(option: str, repository: Path) -> None:
    # 0.4 s is promised on an idle machine; time of the processor does not hang on other programs.
    resource = pytest.importorskip("resource", reason="times of children are POSIX's")
    code = f"import sys; from liverfe.cli import main; sys.exit(main([{option!r}]))"
    taken = []
    for _ in range(3):
        before = resource.getrusage(resource.RUSAGE_CHILDREN)
        subprocess.run(
            [sys.executable, "-c", code], cwd=repository, check=True, stdout=subprocess.PIPE
        )
        after = resource.getrusage(resource.RUSAGE_CHILDREN)
        taken.append(after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime)
    assert min(taken) < 0.4


def test_version_is_the_packages_own(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["--version"]) == 0
    assert capsys.readouterr().out == f"liverfe {liverfe.__version__}\n"


def test_called_with_nothing_it_shows_its_help_and_that_this_was_no_command(
    capsys: pytest.CaptureFixture[str],
) -> None:
    assert main([]) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert captured.err.startswith("Examples:")


def test_shell_completion_is_made_from_the_parser(capsys: pytest.CaptureFixture[str]) -> None:
    assert "--show-completion" in help_of((), capsys)
