"""Each rule of the house was seen to fail: a small project with one fault, and the complaint."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from tests.architecture import rules

ROOMS = ("cli", "batch", "fit", "wording")
LONG = "x = 1\n" * (rules.LONGEST_FILE + 1)
HOST = "pypi" + ".org"
HOME = "/" + "home/someone/scans"


@pytest.fixture
def house(tmp_path: Path) -> Path:
    """A small project in which every rule is kept."""
    for name in rules.TOP_LEVEL:
        if "." in name or name.isupper():
            (tmp_path / name).write_text("words\n", encoding="utf-8")
        else:
            plant(tmp_path, f"{name}/nothing.txt", "words\n")
    table = "\n".join(f"{room}    what it does" for room in ROOMS)
    plant(tmp_path, "liverfe/__init__.py", f'"""A table.\n\n{table}\n"""\n')
    for room in ROOMS:
        plant(tmp_path, f"liverfe/{room}/__init__.py", '"""A room."""\n')
        plant(tmp_path, f"liverfe/{room}/inner.py", '"""Within."""\n')
        plant(tmp_path, f"tests/{room}/test_it.py", "")
    return tmp_path


def plant(house: Path, name: str, text: str) -> None:
    path = house / name
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(text, encoding="utf-8")


FAULTS = [
    (rules.entered_past_the_front_door, "liverfe/cli/a.py", "from liverfe.fit.inner import x"),
    (rules.entered_past_the_front_door, "liverfe/cli/a.py", "from liverfe.fit import inner"),
    (rules.entered_past_the_front_door, "liverfe/cli/a.py", "import liverfe.fit.inner"),
    (rules.entered_past_the_front_door, "liverfe/cli/a.py", "from liverfe.fit import _solve"),
    (rules.entered_past_the_front_door, "liverfe/cli/a.py", "from liverfe.fit.inner import _f"),
    (rules.entered_past_the_front_door, "liverfe/cli/a.py", "from liverfe.wording._a import B"),
    (rules.arithmetic_at_the_doors, "liverfe/cli/a.py", "lic = 0.0254 * r2star + 0.202"),
    (rules.arithmetic_at_the_doors, "liverfe/batch/a.py", "n_done += 1"),
    (rules.arithmetic_at_the_doors, "liverfe/batch/a.py", "t2star = 1000 / r2star"),
    (rules.arithmetic_at_the_doors, "liverfe/cli/a.py", "text = str(round(lic, 2))"),
    (rules.arithmetic_at_the_doors, "liverfe/cli/a.py", "import numpy as np"),
    (rules.files_touched_in_the_middle, "liverfe/fit/a.py", "text = open('site.toml').read()"),
    (rules.files_touched_in_the_middle, "liverfe/fit/a.py", "print(sigma)"),
    (rules.files_touched_in_the_middle, "liverfe/fit/a.py", "stack = np.load('stack.npy')"),
    (rules.vague_names, "liverfe/fit/utils.py", ""),
    (rules.vague_names, "tests/fit/phantom_helpers.py", ""),
    (rules.long_files, "liverfe/fit/a.py", LONG),
    (rules.top_level, "setup.cfg", "[metadata]"),
    (rules.machine_addresses, "docs/a.md", f"The scans lie in {HOME}."),
    (rules.machine_addresses, "requirements.lock", f"# from {HOST}"),
    (rules.undocumented, "liverfe/fit/a.py", '"""Within."""\ndef fit(): ...'),
    (rules.undocumented, "liverfe/fit/a.py", '"""W."""\nclass A:\n "A."\n def f(self): ...'),
    (rules.undocumented, "liverfe/fit/a.py", "x = 1"),
    (rules.rooms_told_wrongly, "liverfe/attic/__init__.py", '"""A room."""'),
    (rules.untested_rooms, "liverfe/attic/__init__.py", '"""A room."""'),
    (rules.untested_rooms, "tests/attic/test_it.py", ""),
]


@pytest.mark.parametrize(("rule", "name", "fault"), FAULTS)
def test_a_planted_fault_is_found(
    rule: Callable[[Path], list[str]], name: str, fault: str, house: Path
) -> None:
    assert rule(house) == []
    plant(house, name, fault + "\n")
    assert len(rule(house)) == 1


def test_a_missing_top_level_file_is_found(house: Path) -> None:
    (house / "LICENSE").unlink()
    assert rules.top_level(house) == ["missing: LICENSE"]


@pytest.mark.parametrize(
    "line",
    [
        'path = out_folder / "result.json"',
        'text = "a" + name + "b"',
        "path = args.out / key",
        "names = [*first] + rest",
        'text = "%s" % name',
        "value: int | None = None",
        'path = Path(out) / key / f"{key}.json"',
    ],
)
def test_joining_words_and_paths_is_no_arithmetic(line: str, house: Path) -> None:
    plant(house, "liverfe/cli/a.py", f'"""Within."""\n{line}\n')
    assert rules.arithmetic_at_the_doors(house) == []


@pytest.mark.parametrize(
    "line",
    [
        "from liverfe.fit import inner",  # a function of the inner module's own name
        "import liverfe.fit",
        "from liverfe import fit, units",
        "from liverfe.wording import inner",
        "from liverfe.wording.inner import SENTENCE",
        "from liverfe.cli.frame import Out",
        "from liverfe.units import t2star_ms",
    ],
)
def test_the_front_door_is_open(line: str, house: Path) -> None:
    front = '"""A room."""\n\nfrom liverfe.fit.inner import inner\n\n__all__ = ["inner"]\n'
    plant(house, "liverfe/fit/__init__.py", front)
    plant(house, "liverfe/units.py", '"""A room of one file."""\n')
    plant(house, "liverfe/cli/a.py", f'"""Within."""\n{line}\n')
    assert rules.entered_past_the_front_door(house) == []


def test_packaged_data_may_be_read_in_the_middle(house: Path) -> None:
    line = 'text = resources.files("liverfe.fit").joinpath("table.toml").read_text()'
    plant(house, "liverfe/fit/a.py", f'"""Within."""\n{line}\n')
    assert rules.files_touched_in_the_middle(house) == []
