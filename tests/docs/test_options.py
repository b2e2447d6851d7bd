"""Options and commands that findings and pages tell a reader to type are there to be typed."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import pytest
import typer

from liverfe.cli.program import app
from liverfe.wording import FINDING_TABLE


def commands(group: Any, before: str = "liverfe") -> dict[str, set[str]]:
    """Map each command, as typed, to its options."""
    found = {}
    for name, command in getattr(group, "commands", {}).items():
        typed = f"{before} {name}"
        options = {text for parameter in command.params for text in parameter.opts}
        found[typed] = options | {"--help", "-h"}
        found |= commands(command, typed)
    return found


@pytest.fixture(scope="module")
def typed() -> dict[str, set[str]]:
    return commands(typer.main.get_command(app))


def test_every_option_in_a_finding_is_an_option_of_a_command(typed: dict[str, set[str]]) -> None:
    there = set().union(*typed.values())
    told = {
        (code, option)
        for code, entry in FINDING_TABLE.items()
        for words in (entry.text, entry.effect, entry.remedy)
        for option in re.findall(r"(?<![\w-])--[a-z][\w-]*", words)
    }
    assert told
    assert [item for item in sorted(told) if item[1] not in there] == []


def test_every_command_line_in_the_documents_can_be_typed(
    typed: dict[str, set[str]], repository: Path
) -> None:
    pages = [*(repository / "docs").rglob("*.md"), *repository.glob("*.md")]
    wrong, n_lines = [], 0
    for page in pages:
        text = page.read_text(encoding="utf-8").replace("\\\n", " ")
        code = "\n".join(re.findall(r"^```\w*\n(.*?)^```", text, re.MULTILINE | re.DOTALL))
        for line in re.findall(r"^(?:\$ )?(liverfe .+)$", code, re.MULTILINE):
            n_lines += 1
            words = line.split()
            fits = [name for name in typed if words[: len(name.split())] == name.split()]
            options = {word.split("=")[0] for word in words if word.startswith("--")}
            if not fits or not options <= typed[max(fits, key=len)]:
                wrong.append(f"{page.name}: {line}")
    assert n_lines > 0
    assert wrong == []
