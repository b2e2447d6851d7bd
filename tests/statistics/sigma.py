"""Row `sigma`: the error of sigma in the liver, by what a scan shows of its noise."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from tests.statistics.cells import Cell, Row, Say, silent, worst
from tests.statistics.studies import SNR, Job, Refused, run

MOST_ERROR = 0.03
_LIVER_R2STAR_PER_S = 150.0
_SCANS: dict[str, dict[str, Any]] = {
    "air": {},
    "air zeroed": {"air": "zeroed"},
    "noise ramp x 3": {"ramp": 3.0},
}


@dataclass(frozen=True, kw_only=True)
class Found:
    """Sigma as the assessment of one scan found it."""

    errors: list[float]
    """Of each square: the median of found over true, less 1."""
    n_channels: int
    refused: str = ""


def measure_sigma(
    *,
    full: bool,
    choices: Mapping[str, Any] | None = None,
    say: Say = silent,
    seed: int = 20_310_404,
) -> Row:
    """Measure the error of sigma in the liver; the number of channels is never handed in."""
    n_scans, slices = (6, 4) if full else (1, 2)
    jobs = [
        Job(
            cell=f"{condition}, n = {n}",
            seed=(seed, k, n, scan),
            r2star_per_s=_LIVER_R2STAR_PER_S,
            slices=slices,
            scan={"n": n, **scan_choices},
            method=choices or {},
        )
        for k, (condition, scan_choices) in enumerate(_SCANS.items())
        for n in ((1, 2, 4, 8, 16, 32) if full else (1,))
        for scan in range(n_scans)
    ]
    found: dict[str, list[Found]] = {job.cell: [] for job in jobs}
    for done, (job, sigma) in enumerate(zip(jobs, run(find_sigma, jobs, spread=full), strict=True)):
        found[job.cell].append(sigma)
        say(f"sigma: {done + 1} of {len(jobs)} scans")
    cells = [_cell(where, scans) for where, scans in found.items()]
    top = worst(cells, lambda cell: cell.measured)
    return Row(
        key="sigma",
        what="error of sigma in the liver, by what the scan shows of its noise",
        asked="at most 3 %",
        measured=f"{top.text} at worst in {len(cells)} cells ({top.where})",
        cells=tuple(cells),
        remarks=(f"RMS over {n_scans} scans of {jobs[0].n_squares} squares a cell, SNR {SNR:g}",),
    )


def find_sigma(job: Job) -> Found:
    """Assess one scan and compare its sigma with the truth in each square."""
    scan = job.make()
    result = job.assess(scan, squares=False)
    if isinstance(result, Refused):
        return Found(errors=[], n_channels=0, refused=result.code)
    assert result.noise is not None
    noise = result.noise
    ratio = np.asarray(noise.sigma if noise.sigma_map is None else noise.sigma_map) / scan.sigma
    squares = [scan.tiles == k for k in range(1, job.n_squares + 1)]
    errors = [float(np.median(ratio[square])) - 1.0 for square in squares]
    return Found(errors=errors, n_channels=noise.n_channels)


def _cell(where: str, scans: list[Found]) -> Cell:
    errors = [error for scan in scans for error in scan.errors]
    refused = [scan.refused for scan in scans if scan.refused]
    channels = sorted({scan.n_channels for scan in scans if not scan.refused})
    rms = float(np.sqrt(np.mean(np.square(errors)))) if errors else float("nan")
    notes = [f"{len(refused)} of {len(scans)} refused: {refused[0]}"] if refused else []
    if channels:
        notes.append(f"n read as {', '.join(map(str, channels))}")
    return Cell(
        where=where,
        measured=100 * rms,
        text=f"{100 * rms:.1f} %" if errors else "no figure",
        reached=not refused and rms <= MOST_ERROR,
        note="; ".join(notes),
    )
