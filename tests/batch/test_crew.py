"""A crew survives the loss of any worker (faults sheet, G1, G2, G9; J3)."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

import pytest

from liverfe.batch.crew import Crew, Ending
from tests.batch.jobs import work


def run(
    tasks: list[tuple[str, Any]], *, n_workers: int = 2, timeout_s: float = 60.0
) -> dict[int, Ending]:
    with Crew(work, n_workers=n_workers, timeout_s=timeout_s) as crew:
        endings = list(crew.run(tasks))
    assert sorted(ending.index for ending in endings) == list(range(len(tasks)))
    return {ending.index: ending for ending in endings}


@pytest.fixture(scope="module")
def ended() -> dict[str, Ending]:
    """What came of one crew's tasks, by what they were."""
    tasks = [
        ("double", 21),
        ("fail", "Quixleyplant"),
        ("no disk", "/data/Quixleyplant"),
        ("usage", "the disk is full"),
        ("threads", None),
        ("ignores interrupt", None),
        ("process", None),
    ]
    before = dict(os.environ)
    endings = run(tasks)
    assert dict(os.environ) == before
    return {tasks[index][0]: ending for index, ending in endings.items()}


def test_a_task_ends_with_its_value(ended: dict[str, Ending]) -> None:
    assert (ended["double"].kind, ended["double"].value) == ("done", 42)
    assert ended["process"].value != os.getpid()


def test_a_fault_is_told_by_kind_and_place_and_never_by_its_message(
    ended: dict[str, Ending],
) -> None:
    fault = ended["fail"]
    assert fault.kind == "fault"
    assert fault.facts["kind"] == "ValueError"
    assert len(fault.facts["incident"]) == 8
    assert "Quixleyplant" not in str(fault)


def test_what_the_system_refuses_is_told_in_its_words(ended: dict[str, Ending]) -> None:
    told = [(ended[task].kind, ended[task].facts["reason"]) for task in ("no disk", "usage")]
    assert told == [("system", "No space left on device"), ("system", "the disk is full")]


def test_workers_have_one_thread_each_and_leave_interrupts_to_their_parent(
    ended: dict[str, Ending],
) -> None:
    assert set(ended["threads"].value.values()) == {"1"}
    assert ended["ignores interrupt"].value is True


def test_a_killed_worker_costs_nobody_else_anything(tmp_path: Path) -> None:
    tasks = [("die", None), ("die once", str(tmp_path / "mark")), ("double", 2)]
    ended = run(tasks, n_workers=1)
    assert ended[0].kind == "died"
    assert (ended[1].kind, ended[1].value) == ("done", "survived")
    assert ended[2].value == 4


def test_a_study_that_hangs_is_given_up_and_the_rest_goes_on() -> None:
    started = time.monotonic()
    ended = run([("sleep", 30), ("double", 4)], n_workers=1, timeout_s=1.0)
    assert ended[0].kind == "timeout"
    assert ended[1].value == 8
    assert time.monotonic() - started < 29


def test_a_crew_keeps_its_workers_from_one_list_to_the_next() -> None:
    with Crew(work, n_workers=1, timeout_s=60.0) as crew:
        (first,) = crew.run([("process", None)])
        (second,) = crew.run([("process", None)])
    assert first.value == second.value


@pytest.mark.skipif(not hasattr(os, "fork"), reason="asks for the processes of POSIX")
def test_busy_workers_end_with_a_parent_that_was_killed(tmp_path: Path, repository: Path) -> None:
    script = tmp_path / "parent.py"
    script.write_text(
        "import os, threading\n"
        "from liverfe.batch.crew import Crew\n"
        "from tests.batch.jobs import work\n"
        "if __name__ == '__main__':\n"
        "    with Crew(work, n_workers=1, timeout_s=60) as crew:\n"
        "        (ending,) = crew.run([('process', None)])\n"
        "        print(ending.value, flush=True)\n"
        "        threading.Timer(1.0, os.kill, (os.getpid(), 9)).start()\n"
        "        list(crew.run([('sleep', 600)]))\n",
        encoding="utf-8",
    )
    with subprocess.Popen(
        [sys.executable, str(script)],
        env={**os.environ, "PYTHONPATH": str(repository)},
        stdout=subprocess.PIPE,
    ) as parent:
        assert parent.stdout is not None
        worker = int(parent.stdout.readline())
        parent.wait(timeout=60)
        deadline = time.monotonic() + 15
        while _is_alive(worker):
            if time.monotonic() > deadline:
                os.kill(worker, 9)
                pytest.fail("the worker outlived its parent")
            time.sleep(0.1)


def _is_alive(process: int) -> bool:
    state = Path(f"/proc/{process}/stat")
    if state.exists() and state.read_text(encoding="ascii").split()[2] == "Z":
        return False  # it has ended, and nobody has asked for its status yet
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    return True
