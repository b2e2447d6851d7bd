"""What is made ready in the background is what a study then needs, and the end waits for it."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

from liverfe.phantom import MadeStudy

NEW_KERNELS = """
import sys
from pathlib import Path
from numba.core.dispatcher import Dispatcher
from liverfe.journey import run_study
from liverfe.journey.warming import start_warming

def compiled():
    return {
        f"{module.__name__}.{name}{signature}"
        for module in list(sys.modules.values())
        if getattr(module, "__name__", "").startswith("liverfe.fit")
        for name, kernel in list(vars(module).items())
        if isinstance(kernel, Dispatcher)
        for signature in kernel.signatures
    }

start_warming().join()
ready = compiled()
assert any("fit" in name for name in ready), ready
drawing = {"liverfe.report", "matplotlib.backends.backend_svg"}
assert drawing <= sys.modules.keys()
images, regions, out = map(Path, sys.argv[1:])
assert not run_study([images], regions=regions, out=out).refused
print("\\n".join(sorted(compiled() - ready)))
"""

ENDS_AT_ONCE = """
import atexit, sys, threading
from liverfe.journey.warming import start_warming
thread = start_warming()
atexit.register(lambda: print(thread.is_alive(), "liverfe.report" in sys.modules))
"""


def python(code: str, *arguments: Path, cwd: Path) -> str:
    ran = subprocess.run(
        [sys.executable, "-c", code, *map(str, arguments)],
        cwd=cwd, capture_output=True, text=True, timeout=240, check=False,
    )  # fmt: skip
    assert (ran.returncode, ran.stderr) == (0, "")
    return ran.stdout


def test_a_study_compiles_nothing_that_was_not_made_ready(
    clean_study: MadeStudy, tmp_path: Path, repository: Path
) -> None:
    # Kernels are compiled once for each kind of array: another one, and the user waits after all.
    new = python(
        NEW_KERNELS, clean_study.images, clean_study.labels, tmp_path / "out", cwd=repository
    )
    assert new.strip() == ""


def test_the_end_of_a_process_waits_for_the_step_at_hand_and_for_no_more(repository: Path) -> None:
    # A compiler that loses its interpreter in mid-work may abort the process; a refused study
    # has no use for the report's figures.
    assert python(ENDS_AT_ONCE, cwd=repository).split() == ["False", "False"]
