"""Row `coverage`: how often the 95 % interval of a region holds its true R2*."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from liverfe.regions import RegionSummary
from tests.statistics.cells import Cell, Row, Say, silent, worst
from tests.statistics.studies import SNR, Job, Refused, run, squares_of
from tests.statistics.truth import S0

COVERAGE = (0.93, 0.97)
_GIVEN = {"noise": "given", "sigma": S0 / SNR, "n_channels": 1}
_CONDITIONS: dict[str, tuple[dict[str, Any], dict[str, Any]]] = {
    "white noise, sigma given": ({}, _GIVEN),
    "white noise, sigma from the scan": ({}, {}),
    "air zeroed, sigma from the scan": ({"air": "zeroed"}, {}),
    "interpolated images, sigma from the scan": ({"interpolated": True}, {}),
}
"""What the scan is like, and what its assessment is told of the noise."""


def measure_coverage(
    *,
    full: bool,
    choices: Mapping[str, Any] | None = None,
    say: Say = silent,
    seed: int = 20_310_403,
) -> Row:
    """Count how often the 95 % interval of a square region holds its true R2*."""
    slices, n_scans = (8, 10) if full else (2, 1)
    jobs = [
        Job(
            cell=f"{condition}, R2* {rate:g}",
            seed=(seed, k, round(rate), scan),
            r2star_per_s=rate,
            slices=slices,
            scan=scan_choices,
            method={**known, **(choices or {})},
        )
        for k, (condition, (scan_choices, known)) in enumerate(_CONDITIONS.items())
        for rate in ((50.0, 200.0, 600.0) if full else (150.0,))
        for scan in range(n_scans)
    ]
    held: dict[str, list[bool]] = {job.cell: [] for job in jobs}
    refused: dict[str, str] = {}
    for done, (job, found) in enumerate(zip(jobs, run(intervals, jobs, spread=full), strict=True)):
        held[job.cell] += found if isinstance(found, list) else [False] * job.n_squares
        if isinstance(found, str):
            refused[job.cell] = found
        say(f"coverage: {done + 1} of {len(jobs)} scans")
    cells = [
        _cell(where, seen, 2.0 if full else 3.5, refused.get(where, ""))
        for where, seen in held.items()
    ]
    together = []
    for condition in _CONDITIONS:
        pooled = [
            hit for where, seen in held.items() if where.startswith(condition) for hit in seen
        ]
        together.append(_cell(f"{condition}, all", pooled, 0.0 if full else 3.5, ""))
    top = worst(together, lambda cell: abs(cell.measured - 95.0))
    low, high = (pick(cell.measured for cell in together) for pick in (min, max))
    return Row(
        key="coverage",
        what="coverage of the 95 % interval of a region of 400 voxels",
        asked="93 to 97 %",
        measured=f"{low:.1f} to {high:.1f} % under {len(together)} conditions; furthest: "
        f"{top.where.removesuffix(', all')}",
        cells=(*cells, *together),
        remarks=(
            f"SNR {SNR:g}, {n_scans * jobs[0].n_squares} regions a condition and R2*; over all "
            "R2* the share must lie within 93 to 97 %, at one R2* within two standard errors of it",
        ),
    )


def intervals(job: Job) -> list[bool] | str:
    """Whether the interval of each square holds the truth; of a refused scan the reason."""
    result = job.assess(job.make())
    if isinstance(result, Refused):
        return f"refused: {result.code}"
    return [_holds(summary, job.r2star_per_s) for summary in squares_of(result)]


def _holds(summary: RegionSummary, truth: float) -> bool:
    """Whether the interval holds the truth; an end not stated lies beyond the limit."""
    found = summary.r2star
    if found.qualifier != "=" or found.low is None:
        return False
    return found.low <= truth and (found.high is None or truth <= found.high)


def _cell(where: str, held: list[bool], leeway: float, why: str) -> Cell:
    """`leeway` in standard errors of the share."""
    share = float(np.mean(held))
    se = float(np.sqrt(0.95 * 0.05 / len(held)))
    return Cell(
        where=where,
        measured=100 * share,
        text=f"{100 * share:.1f} %",
        reached=bool(COVERAGE[0] - leeway * se <= share <= COVERAGE[1] + leeway * se),
        note=why or f"SE {100 * se:.1f} %",
    )
