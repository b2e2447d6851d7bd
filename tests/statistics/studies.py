"""Whole assessments of scans of known truth, for the rows `coverage`, `sigma` and `limit`."""

from __future__ import annotations

import multiprocessing
from collections.abc import Callable, Iterator, Mapping, Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass, field
from typing import Any, TypeVar

import numpy as np
from numba import config

from liverfe.errors import StudyRefused
from liverfe.regions import RegionSummary
from liverfe.study import Method, StudyResult, assess_study
from tests.statistics.truth import TILES_A_SLICE, Scan, make_scan

SNR = 50.0

Result = TypeVar("Result")


@dataclass(frozen=True, kw_only=True)
class Refused:
    """An assessment that ended in findings and no number."""

    code: str


@dataclass(frozen=True, kw_only=True)
class Job:
    """One scan to make and assess; it travels to another process."""

    cell: str
    """The cell of the row that it belongs to."""
    seed: tuple[int, ...]
    r2star_per_s: float
    slices: int
    snr: float = SNR
    scan: Mapping[str, Any] = field(default_factory=dict)
    """Further choices of `make_scan`."""
    method: Mapping[str, Any] = field(default_factory=dict)
    """Choices of `Method`."""

    @property
    def n_squares(self) -> int:
        """Square regions in the scan."""
        return self.slices * TILES_A_SLICE

    def make(self) -> Scan:
        """Make the scan."""
        rng = np.random.default_rng(self.seed)
        return make_scan(self.r2star_per_s, rng, snr=self.snr, slices=self.slices, **self.scan)

    def assess(self, scan: Scan, *, squares: bool = True) -> StudyResult | Refused:
        """Assess the scan by the method of the job."""
        return assess(scan, Method(**self.method), squares=squares)


def assess(scan: Scan, method: Method, *, squares: bool = True) -> StudyResult | Refused:
    """Assess a scan, with the whole liver as a region and, if asked, each square too."""
    regions = scan.regions if squares else scan.regions[:1]
    try:
        return assess_study(scan.stack, regions, method)
    except StudyRefused as refusal:
        return Refused(code=refusal.findings[0].code)


def squares_of(result: StudyResult) -> Iterator[RegionSummary]:
    """The summaries of the square regions, without the whole liver that leads."""
    return (region.summary for region in result.regions[1:])


def run(work: Callable[[Job], Result], jobs: Sequence[Job], *, spread: bool) -> Iterator[Result]:
    """Do `work` for each job, in order; if `spread`, in a process a core."""
    if not spread:
        yield from map(work, jobs)
        return
    processes = int(config.NUMBA_NUM_THREADS)
    # Started anew, not forked: threads of the fit may be at work in this process.
    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(processes, mp_context=context) as pool:
        yield from pool.map(work, jobs)
