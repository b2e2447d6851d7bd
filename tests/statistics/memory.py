"""A process of its own that fits many voxels and prints how much memory that took.

    python -m tests.statistics.memory VOXELS COPIES

Shares of the input array: the peak of the process (compiled code included) where the system tells
it, and the peak that Python itself traced.
"""

from __future__ import annotations

import json
import re
import sys
import tracemalloc
from pathlib import Path

import numpy as np

from liverfe.fit import fit_rows
from tests.statistics.cost import voxels
from tests.statistics.truth import TWELVE_MS

_STATUS = Path("/proc/self/status")
_RESET = Path("/proc/self/clear_refs")


def peak(n_voxels: int, copies: int) -> dict[str, float | None]:
    """Fit `n_voxels` voxels and say what it took, in shares of the input array."""
    some = voxels(20_000, np.random.default_rng(1))
    signal = np.empty((n_voxels, some.shape[1]), np.float32)
    for first in range(0, n_voxels, len(some)):
        part = signal[first : first + len(some)]
        part[:] = some[: len(part)]
    fit_rows(some, TWELVE_MS, np.ones(1), 1)  # compiled and warm
    before = _resident("VmRSS")
    told = before is not None and _reset_peak()
    tracemalloc.start()
    fault = [signal + np.float32(k) for k in range(copies)]
    fit_rows(signal, TWELVE_MS, np.ones(1), 1)
    traced = tracemalloc.get_traced_memory()[1]
    after = _resident("VmHWM")
    del fault
    used = (after - before) / signal.nbytes if told and after and before else None
    return {"resident": used, "traced": traced / signal.nbytes}


def _resident(name: str) -> int | None:
    """Bytes of the process that lie in memory, now (VmRSS) or at most so far (VmHWM)."""
    if not _STATUS.is_file():
        return None
    found = re.search(rf"^{name}:\s+(\d+) kB", _STATUS.read_text(), re.MULTILINE)
    return int(found[1]) * 1024 if found else None


def _reset_peak() -> bool:
    """Let the peak count from now on; not every system lets a process do so."""
    try:
        _RESET.write_text("5")
    except OSError:
        return False
    return True


if __name__ == "__main__":
    print(json.dumps(peak(int(sys.argv[1]), int(sys.argv[2]))))
