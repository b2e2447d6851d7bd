"""What the program does before and after the work of a command costs the user next to nothing."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

COUNTED = """
import gc, sys
from liverfe.cli import main
main(["--version"])
before = sum(generation["collections"] for generation in gc.get_stats())
import liverfe.journey, liverfe.report
print(sum(generation["collections"] for generation in gc.get_stats()) - before)
"""

AT_THE_END = """
import atexit, gc, os
atexit.register(lambda: print(gc.get_freeze_count() > 10_000))
from liverfe.cli import main
main(["--version"])
import liverfe.journey
"""

NOT_FOR_EVERY_RUN = ("matplotlib", "pandas", "scipy.interpolate", "scipy.optimize", "scipy.stats")
"""A tenth to half a second each; whoever needs one of them imports it where it is needed."""

IMPORTED = f"""
import sys
import liverfe.journey
print(",".join(name for name in {NOT_FOR_EVERY_RUN!r} if name in sys.modules) or "none")
"""


def last_word(code: str, repository: Path) -> str:
    ran = subprocess.run(
        [sys.executable, "-c", code], cwd=repository, capture_output=True, text=True, check=True
    )
    return ran.stdout.split()[-1]


def test_importing_what_a_run_needs_is_not_held_up_by_searches_for_garbage(
    repository: Path,
) -> None:
    # With Python's own setting there are several hundred, a tenth of the time of a short run.
    assert int(last_word(COUNTED, repository)) < 50


def test_at_its_end_the_process_is_not_searched_through(repository: Path) -> None:
    # What is frozen is left out of the searches that Python makes while it ends.
    assert last_word(AT_THE_END, repository) == "True"


def test_a_run_imports_only_what_every_run_needs(repository: Path) -> None:
    assert last_word(IMPORTED, repository) == "none"
