"""A crew of worker processes that survives the loss of any of them.

One process a worker and one task at a time in each, so that a worker that is killed or hangs is
known to have had exactly one study in its hands (faults sheet, G2 and G9; argued in
`docs/decisions/0004-one-process-a-worker.md`).
"""

from __future__ import annotations

import logging
import multiprocessing
import os
import signal
import threading
from collections import deque
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from multiprocessing.connection import Connection, wait
from typing import Any, Literal

from liverfe.errors import UsageError
from liverfe.journey import Stopwatch, describe_fault

EndingKind = Literal["done", "fault", "system", "timeout", "died"]

_THREAD_VARIABLES = (
    "OMP_NUM_THREADS",
    "OPENBLAS_NUM_THREADS",
    "MKL_NUM_THREADS",
    "VECLIB_MAXIMUM_THREADS",
    "NUMEXPR_NUM_THREADS",
    "NUMBA_NUM_THREADS",
    "RAYON_NUM_THREADS",
)
"""What numeric libraries and the typesetter read; threads times processes slow all of them down."""

_FAREWELL_S = 5.0
"""How long to wait for a worker that was told to leave."""


_START_S = 120.0
"""How long a worker may take to start: a cold disk under load, and then some."""

_READY = "ready"
"""A worker's first word."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Ending:
    """How a task ended.

    Attributes
    ----------
    index : int
        Which of the tasks.
    kind : {'done', 'fault', 'system', 'timeout', 'died'}
        Done; an exception of ours; an error of the system; out of time; the worker was lost twice.
    value : object
        What the work gave, if done.
    facts : dict of str
        What is known about a failure; never a message that could hold a header's content.
    """

    index: int
    kind: EndingKind
    value: Any
    facts: dict[str, str]


class _Worker:
    """One process, and the pipe to it."""

    def __init__(self, work: Callable[[Any], Any]) -> None:
        context = multiprocessing.get_context("spawn")
        self.pipe, theirs = context.Pipe()
        self.process = context.Process(target=_serve, args=(theirs, work), daemon=True)
        with _as_a_worker_needs_it():
            self.process.start()
        theirs.close()
        self.index = -1
        self.is_ready = False
        self.watch = Stopwatch()

    def give(self, index: int, task: Any) -> None:
        """Hand over a task. A worker that is gone already shows when it is waited for."""
        self.index, self.watch = index, Stopwatch()
        with suppress(OSError):
            self.pipe.send(task)

    def left_of(self, timeout_s: float) -> float:
        """Seconds until it is given up; starting has a limit of its own."""
        limit_s = timeout_s if self.is_ready else max(timeout_s, _START_S)
        return self.watch.left_of(limit_s)

    def dismiss(self) -> None:
        """Let an idle worker leave by itself."""
        self.pipe.close()
        self.process.join(_FAREWELL_S)
        self.kill()

    def kill(self) -> None:
        """End the process, whatever it does."""
        if self.process.is_alive():
            self.process.kill()
        self.process.join(_FAREWELL_S)
        self.pipe.close()


class Crew:
    """Worker processes that work through one list of tasks after another.

    Parameters
    ----------
    work : callable
        A function at the top of a module, so that a fresh process can import it.
    n_workers : int
        Processes; they start when there is something to do.
    timeout_s : float
        After so many seconds a task is given up and its process ended.
    """

    def __init__(self, work: Callable[[Any], Any], *, n_workers: int, timeout_s: float) -> None:
        self._work = work
        self._n_workers = n_workers
        self._timeout_s = timeout_s
        self._idle: list[_Worker] = []
        self._busy: list[_Worker] = []

    def __enter__(self) -> Crew:
        return self

    def __exit__(self, kind: object, *unused: object) -> None:
        if kind is None:
            for worker in self._idle:
                worker.dismiss()
        # Also reached by Ctrl-C: nobody goes on working for a command that has ended.
        for worker in (*self._busy, *self._idle):
            worker.kill()

    def run(self, tasks: Sequence[Any]) -> Iterator[Ending]:
        """Work through tasks.

        Parameters
        ----------
        tasks : sequence
            What the work is called with, one at a time; must be picklable.

        Yields
        ------
        Ending
            One for each task, in the order in which they end. A task whose worker was lost is
            tried once more at the end, alone, and only then ends as ``died``.
        """
        suspects: list[int] = []
        for ending in self._round(tasks, range(len(tasks)), self._n_workers):
            if ending.kind == "died":
                suspects.append(ending.index)
            else:
                yield ending
        for index in suspects:
            yield from self._round(tasks, [index], 1)

    def _round(
        self, tasks: Sequence[Any], indices: Sequence[int], n_workers: int
    ) -> Iterator[Ending]:
        waiting = deque(indices)
        while waiting or self._busy:
            while waiting and len(self._busy) < n_workers:
                worker = self._idle.pop() if self._idle else _Worker(self._work)
                self._busy.append(worker)
                index = waiting.popleft()
                worker.give(index, tasks[index])
            for worker, ending in _collect(self._busy, self._timeout_s):
                self._busy.remove(worker)
                if ending.kind in ("timeout", "died"):
                    worker.kill()
                else:
                    self._idle.append(worker)
                yield ending


def _collect(busy: Sequence[_Worker], timeout_s: float) -> list[tuple[_Worker, Ending]]:
    """Wait until something happens, and tell what."""
    ready = set(
        wait(
            [thing for worker in busy for thing in (worker.pipe, worker.process.sentinel)],
            timeout=min(worker.left_of(timeout_s) for worker in busy),
        )
    )
    ended = []
    for worker in busy:
        ending = _ending_of(worker, ready, timeout_s)
        if ending is not None:
            ended.append((worker, ending))
    return ended


def _ending_of(worker: _Worker, ready: set[Any], timeout_s: float) -> Ending | None:
    kind: EndingKind
    value: Any
    if worker.pipe in ready or worker.pipe.poll():
        try:
            message = worker.pipe.recv()
        except (EOFError, OSError):
            message = ("died", None, {})
        if message == _READY:
            # Its imports are no part of the study's time.
            worker.is_ready, worker.watch = True, Stopwatch()
            return None
        kind, value, facts = message
    elif worker.process.sentinel in ready:
        kind, value, facts = "died", None, {}
    elif worker.left_of(timeout_s) <= 0:
        kind, value, facts = "timeout", None, {}
    else:
        return None
    return Ending(index=worker.index, kind=kind, value=value, facts=facts)


@contextmanager
def _as_a_worker_needs_it() -> Iterator[None]:
    """Set what a child takes over at its start, before any line of ours runs in it.

    One thread each; no warnings of libraries, which quote headers; and no ear for Ctrl-C, which
    reaches the whole group of processes: the parent decides what it means.
    """
    wanted = {**dict.fromkeys(_THREAD_VARIABLES, "1"), "PYTHONWARNINGS": "ignore"}
    before = {name: os.environ.get(name) for name in wanted}
    is_main = threading.current_thread() is threading.main_thread()
    os.environ.update(wanted)
    hears = signal.signal(signal.SIGINT, signal.SIG_IGN) if is_main else None
    try:
        yield
    finally:
        if is_main:
            signal.signal(signal.SIGINT, hears)
        for name, value in before.items():
            if value is None:
                os.environ.pop(name, None)
            else:
                os.environ[name] = value


def _serve(pipe: Connection, work: Callable[[Any], Any]) -> None:
    """Work in a child: take tasks until the pipe closes."""
    # Again, for systems on which a child does not inherit it.
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    logging.lastResort = None
    threading.Thread(target=_leave_with_parent, daemon=True).start()
    pipe.send(_READY)
    while True:
        try:
            task = pipe.recv()
        except (EOFError, OSError):
            return
        pipe.send(_attempt(work, task))


def _attempt(work: Callable[[Any], Any], task: Any) -> tuple[EndingKind, Any, dict[str, str]]:
    try:
        return "done", work(task), {}
    except UsageError as error:
        # Written by us, for readers: a full disk, a folder in use.
        return "system", None, {"reason": str(error)}
    except OSError as error:
        return "system", None, {"reason": error.strerror or type(error).__name__}
    except Exception as error:
        return "fault", None, describe_fault(error)


def _leave_with_parent() -> None:
    """End this process when its parent is gone, even one that was killed."""
    parent = multiprocessing.parent_process()
    if parent is not None:
        wait([parent.sentinel])
        os._exit(1)
