"""How long a batch will take and how much room it needs, before it starts."""

from __future__ import annotations

import math
import shutil
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from liverfe.journey.studies import StudyFound
from liverfe.wording.command_line import GIGABYTES, MEGABYTES

_SECONDS_A_STACK = 1.5
"""Report and checks of a stack, measured on one core of a 2023 server."""

_SECONDS_A_MEGABYTE = 0.13
"""Reading, fitting and writing, for each 10^6 bytes of images; measured likewise."""

_SECONDS_TO_START = 3.0
"""Starting the workers, whatever they do."""

_BYTES_A_STACK = 1_000_000
"""Report, document and tables of a result."""

_BYTES_A_VOXEL = 22
"""All maps of a result, compressed, where every voxel is measured: noise hardly compresses. Air
compresses to nothing, so this is an upper estimate."""


def expected_seconds(studies: Sequence[StudyFound], n_workers: int) -> float:
    """Estimate the time of a batch.

    Parameters
    ----------
    studies : sequence of StudyFound
        What was found.
    n_workers : int
        Processes.

    Returns
    -------
    float
        Seconds; no better than a factor of two.
    """
    each = [
        len(study.usable) * _SECONDS_A_STACK + study.n_bytes / 1e6 * _SECONDS_A_MEGABYTE
        for study in studies
    ]
    # No batch is faster than its slowest study.
    return _SECONDS_TO_START + max(sum(each) / n_workers, *each, 0.0)


def expected_bytes(stacks: Sequence[dict[str, Any]]) -> int:
    """Estimate the room that results need.

    Parameters
    ----------
    stacks : sequence of dict
        Usable stacks, from `preview_stacks`.

    Returns
    -------
    int
        Bytes.
    """
    return sum(_BYTES_A_STACK + _BYTES_A_VOXEL * math.prod(s["shape"] or (0,)) for s in stacks)


def free_bytes(folder: Path) -> int:
    """Tell how much room there is where a folder lies, or will lie."""
    existing = next(place for place in (folder, *folder.resolve().parents) if place.exists())
    return shutil.disk_usage(existing).free


def told_size(n_bytes: int) -> str:
    """Tell a size in the unit that suits it."""
    if n_bytes < 1e9:
        return MEGABYTES.format(mb=n_bytes / 1e6)
    return GIGABYTES.format(gb=n_bytes / 1e9)
