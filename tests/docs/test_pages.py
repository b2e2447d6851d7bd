"""What the documents say about the program is what the program says."""

from __future__ import annotations

import re
import runpy
import tomllib
from pathlib import Path

from liverfe import __version__
from liverfe.wording import FINDING_TABLE


def test_the_page_of_findings_is_the_table(repository: Path) -> None:
    script = runpy.run_path(str(repository / "scripts" / "findings_page.py"))
    shown = (repository / "docs" / "reference" / "findings.md").read_text(encoding="utf-8")
    assert shown == script["page"](), "run scripts/findings_page.py"


def test_each_finding_has_its_place_on_the_page_once(repository: Path) -> None:
    shown = (repository / "docs" / "reference" / "findings.md").read_text(encoding="utf-8")
    assert sorted(re.findall(r"^### `(.+)`$", shown, re.MULTILINE)) == sorted(FINDING_TABLE)


def test_the_changelog_knows_this_version(repository: Path) -> None:
    changelog = (repository / "docs" / "changelog.md").read_text(encoding="utf-8")
    newest = re.search(r"^## (\S+)", changelog, re.MULTILINE)
    assert newest is not None
    assert newest[1] == __version__


def test_the_developers_page_names_every_check(repository: Path) -> None:
    page = (repository / "DEVELOPERS.md").read_text(encoding="utf-8")
    script = (repository / "scripts" / "check").read_text(encoding="utf-8")
    checks = re.findall(r'^    "([a-z-]+)": \[', script, re.MULTILINE)
    assert len(checks) >= 9
    assert [name for name in checks if f"| `{name}` |" not in page] == []


def test_every_pinned_python_is_a_promised_python(repository: Path) -> None:
    settings = tomllib.loads((repository / "pyproject.toml").read_text(encoding="utf-8"))
    classifiers = " ".join(settings["project"]["classifiers"])
    promised = re.findall(r"Python :: (3\.\d+)", classifiers)
    assert promised == ["3.11", "3.12", "3.13", "3.14"]
    assert settings["project"]["requires-python"] == f">={promised[0]}"
    for script in ("demo.py", "test.py", "check"):
        text = (repository / "scripts" / script).read_text(encoding="utf-8")
        assert f"Python {promised[0]} to {promised[-1]}" in text
