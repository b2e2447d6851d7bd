"""Row `limit`: what lies beyond a region's limit says so, and no number lies beyond one."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from liverfe.regions import RegionSummary
from liverfe.study import Method, StudyResult, assess_study
from tests.statistics.cells import Cell, Row, Say, silent
from tests.statistics.studies import Job, Refused, run, squares_of
from tests.statistics.theory import bound_per_s, measurable_per_s
from tests.statistics.truth import TWELVE_MS

LEAST_CENSORED = 0.99
BEYOND = 1.3
_ROUNDING = 1.0 + 1e-6
_SHARE = 0.10
"""Of R2*: where a voxel's bound reaches it lies its limit."""
_LOOKED_AT = 200
"""Voxels of one scan that look as if beyond their limit and are worked out by themselves."""
_KNOWN_TO = 1.03
"""A voxel's own limit hangs on sigma as found, which is known to a percent or so."""


@dataclass(frozen=True, kw_only=True)
class Seen:
    """Regions of one scan or cell, counted."""

    regions: int = 0
    measured: int = 0
    """With a number."""
    far: int = 0
    """Whose true R2* is at least 1.3 times the limit that they state."""
    censored: int = 0
    """Of those: said to be over the limit, or refused with the study, which states no number."""
    beyond: int = 0
    """With any number beyond the limit that they state."""
    refused: str = ""

    def __add__(self, other: Seen) -> Seen:
        """Both together."""
        return Seen(
            regions=self.regions + other.regions,
            measured=self.measured + other.measured,
            far=self.far + other.far,
            censored=self.censored + other.censored,
            beyond=self.beyond + other.beyond,
            refused=self.refused or other.refused,
        )


def measure_limit(
    *,
    full: bool,
    choices: Mapping[str, Any] | None = None,
    say: Say = silent,
    seed: int = 20_310_405,
) -> Row:
    """Count regions beyond their limit that say so, and look for numbers beyond a limit."""
    slices, n_scans = (4, 3) if full else (2, 1)
    jobs = [
        Job(
            cell=f"SNR {snr:g}, R2* {part:g} x the limit of one voxel",
            seed=(seed, round(snr), round(100 * part), scan),
            r2star_per_s=part * measurable_per_s(TWELVE_MS, snr)[1],
            slices=slices,
            snr=snr,
            method=choices or {},
        )
        for snr in ((20.0, 50.0, 100.0) if full else (50.0,))
        for part in ((0.7, 1.0, 1.3, 1.5, 2.0, 3.0, 5.0, 10.0) if full else (0.7, 1.5))
        for scan in range(n_scans)
    ]
    seen = {job.cell: Seen() for job in jobs}
    for done, (job, found) in enumerate(zip(jobs, run(look, jobs, spread=full), strict=True)):
        seen[job.cell] += found
        say(f"limit: {done + 1} of {len(jobs)} scans")
    cells = [_cell(where, counts) for where, counts in seen.items()]
    near = " 1 x" if full else " 1.5 x"
    at_limit = [job for job in jobs if near in job.cell][::n_scans]
    cells += [look_at_maps(job) for job in at_limit]
    counted = [cell.measured for cell in cells if cell.measured == cell.measured]
    if not counted:
        cells.append(Cell(where="all", measured=float("nan"), text="no region", reached=False))
    inside = [counts for where, counts in seen.items() if " 0.7 x" in where]
    told = 100 * sum(s.measured for s in inside) / sum(s.regions for s in inside)
    beyond = sum(counts.beyond for counts in seen.values())
    lowest = min(counted, default=float("nan"))
    return Row(
        key="limit",
        what="true R2* of 1.3 x the region's limit and more is censored; no number beyond a limit",
        asked="99 % of regions, no number",
        measured=f"{lowest:.1f} % in the worst of {len(counted)} cells, {beyond} regions with a "
        "number beyond",
        cells=tuple(cells),
        remarks=(
            f"inside the limit (0.7 x) {told:.0f} % of regions get a number",
            f"{n_scans * jobs[0].n_squares} regions a cell",
        ),
    )


def look(job: Job) -> Seen:
    """Assess one scan and count its squares."""
    result = job.assess(job.make())
    if isinstance(result, Refused):
        n = job.n_squares
        return Seen(regions=n, far=n, censored=n, refused=result.code)
    seen = Seen()
    for summary in squares_of(result):
        far = job.r2star_per_s >= BEYOND * summary.limits.high_r2star_per_s
        seen += Seen(
            regions=1,
            measured=int(summary.r2star.qualifier == "="),
            far=int(far),
            censored=int(far and summary.r2star.qualifier == ">"),
            beyond=int(_goes_beyond(summary, result)),
        )
    return seen


def look_at_maps(job: Job) -> Cell:
    """Assess a scan without regions: no voxel of its maps may show more than its own limit."""
    scan = job.make()
    result = assess_study(scan.stack, [], Method(**job.method))
    assert result.maps is not None
    shown = np.isfinite(result.maps.r2star_per_s)
    rate = result.maps.r2star_per_s[shown].astype(float)
    snr = result.maps.s0[shown] / scan.sigma[shown]
    points = np.geomspace(5.0, 400.0, 25)
    limits = [measurable_per_s(TWELVE_MS, point)[1] for point in points]
    known = np.isfinite(limits)
    # A first sight; what is near its limit, or may have none, is worked out by itself.
    own = np.interp(np.log(snr), np.log(points[known]), np.array(limits)[known], left=0.0)
    near = np.flatnonzero(rate > own)[:_LOOKED_AT]
    beyond = sum(_is_beyond(float(rate[k]), float(snr[k])) for k in near)
    return Cell(
        where=f"{job.cell}, maps alone",
        measured=float("nan"),
        text=f"{beyond} of {len(rate)} voxels beyond their own limit",
        reached=not beyond,
    )


def _is_beyond(rate: float, snr: float) -> bool:
    """Whether the bound of one voxel exceeds its share of R2* and rises: the fast end."""
    here, further = (bound_per_s(TWELVE_MS, r, snr) / r for r in (rate, 1.02 * rate))
    return here > _SHARE * _KNOWN_TO and further > here


def _goes_beyond(summary: RegionSummary, result: StudyResult) -> bool:
    """Whether any number of a region, or of its voxels in the maps, lies beyond its limit."""
    limit = summary.limits.high_r2star_per_s * _ROUNDING
    told = [summary.r2star.value, summary.r2star.high, summary.r2star.mean]
    assert result.maps is not None
    shown = np.asarray(result.maps.r2star_per_s[summary.mask])
    return any(value is not None and value > limit for value in told) or bool((shown > limit).any())


def _cell(where: str, seen: Seen) -> Cell:
    share = 100 * seen.censored / seen.far if seen.far else float("nan")
    notes = []
    if seen.refused:
        notes.append(f"refused: {seen.refused}")
    if seen.beyond:
        notes.append(f"{seen.beyond} regions with a number beyond their limit")
    if not seen.far:
        notes.append(f"none is so far beyond; {seen.measured} of {seen.regions} measured")
    return Cell(
        where=where,
        measured=share,
        text=f"{share:.1f} % of {seen.far}" if seen.far else "-",
        reached=not seen.beyond and (not seen.far or share >= 100 * LEAST_CENSORED),
        note="; ".join(notes),
    )
