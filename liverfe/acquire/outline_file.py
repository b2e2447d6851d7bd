"""The outline file: regions as closed outlines in patient millimetres, read and written.

A JSON document of our own; its form is described in ``docs/reference/outline-file.md``. Every
fault is reported by the path of its key, for example ``regions[0].outlines[2].points_mm[5]``.
"""

from __future__ import annotations

import json
import math
import os
import tempfile
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from liverfe.acquire.naming import shown_name
from liverfe.errors import Finding, StudyRefused
from liverfe.outlines import Outline, Region, organ_from_name

SCHEMA = 1
KIND = "liverfe outlines"
SPACE = "patient RAS+ mm"
SOURCE = "outline file"

_LARGEST_FILE = 64 * 1024 * 1024
"""A whole liver drawn on every slice is below 1 MiB."""

_FARTHEST_MM = 10_000.0
"""No scanner is longer; a greater coordinate has another unit."""

_DOCUMENT_KEYS = {"schema", "kind", "space", "frame_of_reference_uid", "comment", "regions"}
_REGION_KEYS = {"name", "organ", "comment", "outlines"}
_OUTLINE_KEYS = {"role", "points_mm"}


class _Fault(Exception):
    """Something at `key` is not as it should be."""

    def __init__(self, key: str, reason: str) -> None:
        super().__init__(f"{key}: {reason}")
        self.key = key
        self.reason = reason


def read_outlines(path: Path) -> tuple[Region, ...]:
    """Read an outline file.

    Parameters
    ----------
    path : Path
        The file.

    Returns
    -------
    tuple of Region
        At least one, names distinct, in the file's order.

    Raises
    ------
    StudyRefused
        With ``region-file-unreadable``, ``region-file-invalid`` or ``region-empty``.
    """
    file = shown_name(path)
    try:
        if path.stat().st_size > _LARGEST_FILE:
            raise ValueError("it is too large for an outline file")
        document = json.loads(path.read_bytes())
    except (OSError, ValueError) as error:
        reason = str(error) or type(error).__name__
        raise StudyRefused(
            Finding.of("region-file-unreadable", file=file, reason=reason)
        ) from error
    try:
        regions = _regions(document)
    except _Fault as fault:
        raise StudyRefused(
            Finding.of("region-file-invalid", file=file, key=fault.key, reason=fault.reason)
        ) from fault
    if not regions:
        raise StudyRefused(Finding.of("region-empty", file=file))
    return regions


def write_outlines(path: Path, regions: Sequence[Region]) -> None:
    """Write regions that are drawn as outlines to an outline file, whole or not at all.

    Parameters
    ----------
    path : Path
        Replaced if it is there.
    regions : sequence of Region
        Drawn as outlines; of one frame of reference.

    Raises
    ------
    ValueError
        If a region is a label mask, names repeat, or the frames of reference differ.
    """
    frames = {region.frame_of_reference_uid for region in regions}
    if len(frames) > 1:
        raise ValueError("regions of different frames of reference belong in different files")
    if len({region.name for region in regions}) < len(regions):
        raise ValueError("each region of a file needs a name of its own")
    document: dict[str, Any] = {"schema": SCHEMA, "kind": KIND, "space": SPACE}
    if frames - {""}:
        document["frame_of_reference_uid"] = frames.pop()
    document["regions"] = [_as_json(region) for region in regions]
    text = json.dumps(document, ensure_ascii=False, allow_nan=False, indent=1) + "\n"
    handle, temporary = tempfile.mkstemp(prefix=f".{path.name}.", dir=path.parent)
    try:
        with os.fdopen(handle, "w", encoding="utf-8", newline="\n") as file:
            file.write(text)
            file.flush()
            os.fsync(file.fileno())
        Path(temporary).replace(path)
    except BaseException:
        Path(temporary).unlink(missing_ok=True)
        raise


def _as_json(region: Region) -> dict[str, Any]:
    if not isinstance(region.shape, tuple):
        raise ValueError(f"region {region.name!r} is a label mask, not outlines")
    return {
        "name": region.name,
        "organ": region.organ,
        "outlines": [
            {"role": outline.role, "points_mm": outline.points_mm.tolist()}
            for outline in region.shape
        ],
    }


def _regions(document: Any) -> tuple[Region, ...]:
    table = _table(document, "the document", _DOCUMENT_KEYS)
    for key, wanted in (("kind", KIND), ("schema", SCHEMA), ("space", SPACE)):
        if table.get(key) != wanted or isinstance(table.get(key), bool):
            raise _Fault(key, f"{wanted!r} is wanted, {table.get(key)!r} is there")
    frame = _text(table.get("frame_of_reference_uid", ""), "frame_of_reference_uid")
    regions: list[Region] = []
    for i, item in enumerate(_list(table.get("regions"), "regions")):
        key = f"regions[{i}]"
        region = _region(_table(item, key, _REGION_KEYS), key, frame)
        if region.name in {other.name for other in regions}:
            raise _Fault(f"{key}.name", f"{region.name!r} is there twice")
        regions.append(region)
    return tuple(regions)


def _region(table: dict[str, Any], key: str, frame: str) -> Region:
    name = _text(table.get("name"), f"{key}.name")
    organ = _text(table.get("organ", ""), f"{key}.organ") or organ_from_name(name)
    outlines = tuple(
        _outline(item, f"{key}.outlines[{j}]")
        for j, item in enumerate(_list(table.get("outlines"), f"{key}.outlines"))
    )
    try:
        return Region(
            name=name,
            organ=organ,
            shape=outlines,
            source=SOURCE,
            frame_of_reference_uid=frame,
        )
    except ValueError as error:
        raise _Fault(key, str(error)) from error


def _outline(item: Any, key: str) -> Outline:
    table = _table(item, key, _OUTLINE_KEYS)
    role = table.get("role", "include")
    if role not in ("include", "exclude"):
        raise _Fault(f"{key}.role", f"include or exclude is wanted, {role!r} is there")
    points = _list(table.get("points_mm"), f"{key}.points_mm")
    if len(points) < 3:
        raise _Fault(f"{key}.points_mm", f"at least 3 corners are wanted, {len(points)} are there")
    return Outline(points_mm=_corners(points, f"{key}.points_mm"), role=role)


def _corners(points: list[Any], key: str) -> NDArray[np.float64]:
    for n, point in enumerate(points):
        is_point = (
            isinstance(point, list)
            and len(point) == 3
            and all(isinstance(v, (int, float)) and not isinstance(v, bool) for v in point)
            and all(math.isfinite(v) and abs(v) < _FARTHEST_MM for v in point)
        )
        if not is_point:
            raise _Fault(f"{key}[{n}]", "three numbers in mm are wanted: [x, y, z]")
    return np.array(points, dtype=np.float64)


def _table(value: Any, key: str, known: set[str]) -> dict[str, Any]:
    if not isinstance(value, dict):
        raise _Fault(key, "an object in braces is wanted")
    unknown = sorted(set(value) - known)
    if unknown:
        raise _Fault(f"{key}.{unknown[0]}", f"no such key; known are {', '.join(sorted(known))}")
    return value


def _list(value: Any, key: str) -> list[Any]:
    if not isinstance(value, list):
        raise _Fault(key, "a list in brackets is wanted")
    return value


def _text(value: Any, key: str) -> str:
    if not isinstance(value, str):
        raise _Fault(key, "a text in quotes is wanted")
    return value
