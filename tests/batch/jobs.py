"""Work for crews under test; a fresh process imports it from here."""

from __future__ import annotations

import os
import signal
import time
from pathlib import Path
from typing import Any

from liverfe.errors import UsageError


def work(task: tuple[str, Any]) -> Any:
    """Do what the task says, or come to grief as it says."""
    what, value = task
    if what == "double":
        return value * 2
    if what == "sleep":
        time.sleep(value)
        return value
    if what == "die":
        _die()
    if what == "die once":
        mark = Path(value)
        if not mark.exists():
            mark.write_text("died", encoding="ascii")
            _die()
        return "survived"
    if what == "fail":
        raise ValueError(f"patient {value} in header")
    if what == "no disk":
        raise OSError(28, "No space left on device", value)
    if what == "usage":
        raise UsageError(value)
    if what == "threads":
        names = ("OMP_NUM_THREADS", "NUMBA_NUM_THREADS", "RAYON_NUM_THREADS")
        return {name: os.environ.get(name) for name in names}
    if what == "ignores interrupt":
        return signal.getsignal(signal.SIGINT) == signal.SIG_IGN
    if what == "process":
        return os.getpid()
    raise AssertionError(what)


def _die() -> None:
    if hasattr(signal, "SIGKILL"):
        os.kill(os.getpid(), signal.SIGKILL)
    os._exit(9)
