"""What this machine can do at all: the roofline that speed is seen against."""

from __future__ import annotations

import os
import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np
from numba import config

_WORDS = 16_000_000
"""float32 numbers of the arrays that are copied: 64 MB, beyond the near caches."""
_NEAR_WORDS = 16_384
"""float32 numbers that stay in the nearest caches: 64 kB."""


@dataclass(frozen=True, kw_only=True)
class Roofline:
    """Measured in one run, all cores at work.

    Attributes
    ----------
    cores : int
        Cores open to this process.
    copy_gb_per_s : float
        Memory bandwidth of a copy, bytes read and written.
    exp_ns, log_ns : float
        Time of one float32 exp or log on one core, NumPy's vector code, data in the near cache.
    """

    cores: int
    copy_gb_per_s: float
    exp_ns: float
    log_ns: float

    def least_seconds(self, n_voxels: int, n_echoes: int, *, steps: int) -> float:
        """Time below which no fit of `steps` iterations can come on this machine.

        Each echo of each voxel must be read once (4 bytes) and takes one exp a step; five results
        of 4 bytes or less a voxel are written.
        """
        moved = 4.0 * n_voxels * (n_echoes + 5) / (self.copy_gb_per_s * 1e9)
        worked = n_voxels * n_echoes * steps * self.exp_ns * 1e-9 / self.cores
        return max(moved, worked)


def measure_roofline(*, repeats: int = 7) -> Roofline:
    """Measure memory bandwidth and the throughput of exp and log, the best of some repeats."""
    cores = int(config.NUMBA_NUM_THREADS)
    source, target = np.ones(_WORDS, np.float32), np.empty(_WORDS, np.float32)
    parts = np.array_split(np.arange(_WORDS), cores)
    slices = [slice(int(part[0]), int(part[-1]) + 1) for part in parts]
    near = [np.linspace(0.1, 4.0, _NEAR_WORDS, dtype=np.float32) for _ in range(cores)]
    out = [np.empty_like(x) for x in near]
    rounds = 200
    with ThreadPoolExecutor(cores) as pool:

        def best(work: Callable[[int], object]) -> float:
            seconds = []
            for _ in range(repeats):
                started = time.perf_counter()
                list(pool.map(work, range(cores)))
                seconds.append(time.perf_counter() - started)
            return min(seconds)

        def repeat(function: np.ufunc) -> Callable[[int], object]:
            def work(core: int) -> None:
                for _ in range(rounds):
                    function(near[core], out[core])

            return work

        copied = best(lambda core: np.copyto(target[slices[core]], source[slices[core]]))
        exp, log = best(repeat(np.exp)), best(repeat(np.log))
    each = 1e9 / (rounds * _NEAR_WORDS)
    return Roofline(
        cores=cores,
        copy_gb_per_s=8.0 * _WORDS / copied * 1e-9,
        exp_ns=exp * each,
        log_ns=log * each,
    )


def load() -> float | None:
    """How many processes wanted a core in the last minute, where the system tells."""
    return os.getloadavg()[0] if hasattr(os, "getloadavg") else None
