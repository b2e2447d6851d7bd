"""`requirements.lock` holds what pyproject.toml asks for, on every machine, and no address."""

from __future__ import annotations

import importlib.metadata
import re
import sys
import tomllib
from collections import Counter
from pathlib import Path
from typing import Any

import pytest
from packaging.requirements import Requirement
from packaging.utils import canonicalize_name

from tests.architecture.tree import imported_modules, python_sources

MACHINES = [
    {"sys_platform": system, "platform_machine": machine, "platform_system": long, "os_name": os}
    for system, long, os, machine in [
        ("linux", "Linux", "posix", "x86_64"),
        ("linux", "Linux", "posix", "aarch64"),
        ("darwin", "Darwin", "posix", "arm64"),
        ("darwin", "Darwin", "posix", "x86_64"),
        ("win32", "Windows", "nt", "AMD64"),
    ]
]
PYTHONS = [{"python_version": f"3.{n}", "python_full_version": f"3.{n}.2"} for n in range(11, 15)]
MARK = "# ---- from here: tests and checks only ----"


@pytest.fixture(scope="module")
def lock(repository: Path) -> str:
    return (repository / "requirements.lock").read_text(encoding="utf-8")


@pytest.fixture(scope="module")
def project(repository: Path) -> dict[str, Any]:
    text = (repository / "pyproject.toml").read_text(encoding="utf-8")
    settings = tomllib.loads(text)
    return {**settings["project"], "build": settings["build-system"]["requires"]}


def pins(text: str) -> list[Requirement]:
    lines = re.findall(r"^[a-z0-9].*?(?= \\$)", text, re.MULTILINE)
    return [Requirement(line) for line in lines]


def test_the_lock_holds_pins_and_hashes_and_nothing_else(lock: str) -> None:
    pin, digest = r"[a-z0-9.-]+==\S+( ; [^\\]+)? \\", r" {4}--hash=sha256:[0-9a-f]{64}( \\)?"
    odd = [
        line
        for line in lock.splitlines()
        if not (line.startswith("#") or re.fullmatch(pin, line) or re.fullmatch(digest, line))
    ]
    assert odd == []
    assert "//" not in lock
    entries = re.split(r"\n(?=[a-z0-9])", lock)[1:]
    assert all("--hash=sha256:" in entry for entry in entries)
    assert len(entries) == len(pins(lock))


@pytest.mark.parametrize(
    "machine", MACHINES, ids=lambda m: f"{m['sys_platform']}-{m['platform_machine']}"
)
@pytest.mark.parametrize("python", PYTHONS, ids=lambda p: p["python_version"])
def test_every_wish_has_one_fitting_pin_on_this_machine(
    machine: dict[str, str], python: dict[str, str], lock: str, project: dict[str, Any]
) -> None:
    here = {**machine, **python, "platform_python_implementation": "CPython", "extra": ""}
    wishes = project["dependencies"] + project["build"] + project["optional-dependencies"]["dev"]
    found = [pin for pin in pins(lock) if pin.marker is None or pin.marker.evaluate(here)]
    assert max(Counter(pin.name for pin in found).values()) == 1
    versions = {pin.name: next(iter(pin.specifier)).version for pin in found}
    for wish in map(Requirement, wishes):
        if wish.marker is None or wish.marker.evaluate(here):
            assert wish.specifier.contains(versions[canonicalize_name(wish.name)]), wish


def test_the_first_section_is_enough_to_run_liverfe(lock: str, project: dict[str, Any]) -> None:
    # From outside: what the installed packages' own metadata ask for.
    first = {pin.name for pin in pins(lock.split(MARK)[0])}
    to_visit = [Requirement(wish) for wish in project["dependencies"] + project["build"]]
    needed: set[str] = set()
    while to_visit:
        wish = to_visit.pop()
        name = canonicalize_name(wish.name)
        if name in needed or (wish.marker and not wish.marker.evaluate({"extra": ""})):
            continue
        needed.add(name)
        to_visit += [Requirement(text) for text in importlib.metadata.requires(name) or []]
    assert needed <= first
    assert "pytest" not in first
    assert "numpy" in needed


def test_the_scripts_agree_where_the_second_section_begins(lock: str, repository: Path) -> None:
    for script in ("lock", "environment.py"):
        assert MARK in (repository / "scripts" / script).read_text(encoding="utf-8")
    assert lock.count(MARK) == 1


def test_what_tests_and_scripts_import_is_declared(
    repository: Path, project: dict[str, Any]
) -> None:
    # deptry looks at the package alone; this looks at what stands around it.
    wishes = project["dependencies"] + project["optional-dependencies"]["dev"]
    declared = {canonicalize_name(Requirement(wish).name) for wish in wishes}
    providers = importlib.metadata.packages_distributions()
    ours = {"liverfe", "tests", "environment"} | set(sys.stdlib_module_names)
    undeclared = set()
    for source in python_sources(repository, "tests", "scripts", "docs"):
        for line, name in imported_modules(source):
            top = name.split(".")[0]
            known = {canonicalize_name(provider) for provider in providers.get(top, [])}
            if top not in ours and not known & declared:
                undeclared.add(f"{source.path}:{line} {top}")
    assert undeclared == set()
