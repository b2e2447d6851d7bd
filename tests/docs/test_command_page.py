"""The page of the command line is what the parser says."""

from __future__ import annotations

import re
import runpy
from pathlib import Path

from liverfe.cli.program import app
from liverfe.journey import Settings
from tests.docs.test_options import commands


def test_the_page_is_made_from_the_parser(repository: Path) -> None:
    script = runpy.run_path(str(repository / "scripts" / "command_page.py"))
    shown = (repository / "docs" / "reference" / "command-line.md").read_text(encoding="utf-8")
    assert shown == script["page"](), "run scripts/command_page.py"


def test_every_command_option_and_setting_is_documented(repository: Path) -> None:
    import typer

    shown = (repository / "docs" / "reference" / "command-line.md").read_text(encoding="utf-8")
    for typed, options in commands(typer.main.get_command(app)).items():
        if typed == "liverfe phantom":
            continue
        section = shown.split(f"## `{typed}`")[1].split("\n## ")[0]
        for option in {o for o in options if o.startswith("--")} - {"--help"}:
            assert f"`{option}" in section, (typed, option)
    for name in Settings().explained():
        assert f"| `{name}` |" in shown
    # The statuses that the contract names.
    assert re.findall(r"^\| (\d+) \|", shown, re.MULTILINE) == ["0", "1", "2", "3", "4", "130"]
