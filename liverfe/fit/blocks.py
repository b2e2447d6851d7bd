"""Running a compiled kernel over many voxels on all cores.

Plain threads over blocks of rows: the kernels release the interpreter lock, each voxel stands
alone, and unlike a compiled parallel loop this can be called from worker processes and from a
server's threads at once.
"""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

from numba import config

_BLOCK = 16_384
"""Rows at a time: small enough to share the work out evenly, large enough to hide the call."""


def run_in_blocks(work: Callable[[slice], None], n_rows: int) -> None:
    """Call `work` for slices that cover ``range(n_rows)``, on as many threads as there are cores.

    Parameters
    ----------
    work : callable
        Takes a slice of rows; writes only to those rows.
    n_rows : int
        Number of rows.
    """
    slices = [slice(start, min(start + _BLOCK, n_rows)) for start in range(0, n_rows, _BLOCK)]
    # numba's own setting: the cores open to this process, or the variable NUMBA_NUM_THREADS.
    n_cores = int(config.NUMBA_NUM_THREADS)  # type: ignore[attr-defined]
    n_threads = min(len(slices), n_cores)
    if n_threads <= 1:
        for rows in slices:
            work(rows)
        return
    with ThreadPoolExecutor(n_threads) as pool:
        for done in [pool.submit(work, rows) for rows in slices]:
            done.result()
