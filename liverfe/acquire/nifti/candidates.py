"""Which NIfTI files hold magnitude echoes, and which of them belong together."""

from __future__ import annotations

import re
from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from liverfe.acquire.dicom.components import image_kind
from liverfe.acquire.dicom.elements import Elements
from liverfe.acquire.nifti.sidecar import (
    NameParts,
    echo_times_ms,
    name_parts,
    number,
    read_sidecars,
    text,
    words,
)
from liverfe.acquire.nifti.volume import NiftiFile
from liverfe.acquire.walk import FoundFile

_ECHO_SUFFIXES = frozenset({"MEGRE", "T2starw"})
"""BIDS suffixes of multi-echo gradient echoes; T2starw was used before MEGRE was there."""

_MAP_SUFFIXES = frozenset(
    "R2starmap T2starmap R2map T2map S0map M0map PDmap Chimap LICmap mask dseg probseg".split()
)

_COMPONENT_WORDS = {
    "ph": "phase", "pha": "phase", "phase": "phase", "real": "real", "imag": "imaginary",
    "imaginary": "imaginary",
}  # fmt: skip
"""Words of file names that name another component than magnitude (dcm2niix, BIDS part)."""

_LABEL_WORDS = ("regions", "dseg")


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class EchoFile:
    """A NIfTI file that may hold one echo or all, and what its sidecars say.

    Attributes
    ----------
    file : NiftiFile
        Its header.
    is_named : bool
        Whether the user named this very file.
    parts : NameParts
        Its name.
    sidecar : dict
        Merged.
    sidecars : tuple of Path
        The files it came from.
    times_ms : tuple of float
        Echo times of its volumes; empty where nothing states them.
    time_source : str
        ``sidecar`` or ``user``.
    """

    file: NiftiFile
    is_named: bool
    parts: NameParts
    sidecar: dict[str, Any]
    sidecars: tuple[Path, ...]
    times_ms: tuple[float, ...]
    time_source: str = "sidecar"

    def with_times(self, times_ms: tuple[float, ...]) -> EchoFile:
        """Take echo times that the user states."""
        return replace(self, times_ms=times_ms, time_source="user")


def is_label_image(path: Path) -> bool:
    """Tell by its name whether a NIfTI file holds regions, not echoes."""
    return any(word in path.name.lower() for word in _LABEL_WORDS)


def why_no_echo(path: Path) -> tuple[str, str] | None:
    """Tell by its name why a NIfTI file is no echo; None where nothing says so."""
    if is_label_image(path):
        return "label image", "it holds regions, no signal"
    parts = name_parts(path)
    if parts.suffix in _MAP_SUFFIXES or "desc" in parts.entities:
        return "map or mask", "it was computed from images and is none itself"
    if parts.is_bids and parts.suffix not in _ECHO_SUFFIXES:
        return f"BIDS {parts.suffix} image", "it is no multi-echo gradient echo"
    return None


def open_echo_file(found: FoundFile, file: NiftiFile) -> EchoFile:
    """Read the sidecars of a NIfTI file.

    Raises
    ------
    StudyRefused
        With ``sidecar-unreadable``.
    """
    sidecar, sidecars = read_sidecars(found.path)
    return EchoFile(
        file=file,
        is_named=found.is_named,
        parts=name_parts(found.path),
        sidecar=sidecar,
        sidecars=sidecars,
        times_ms=echo_times_ms(sidecar),
    )


def kind_of(echo: EchoFile) -> str:
    """Tell magnitude, phase, ... by sidecar, BIDS part or the words of the name."""
    stated = image_kind(
        Elements(), words(echo.sidecar, "ImageType"), text(echo.sidecar, "ComplexImageComponent")
    )
    if stated != "unknown":
        return stated
    part = echo.parts.entities.get("part", "")
    if part:
        return {"mag": "magnitude", **_COMPONENT_WORDS}.get(part, "unknown")
    for word in re.split(r"[^a-z]+", echo.parts.stem.lower()):
        if word in _COMPONENT_WORDS:
            return _COMPONENT_WORDS[word]
    return "unknown"


def group_echoes(echoes: Sequence[EchoFile]) -> list[list[EchoFile]]:
    """Put the files of one acquisition together: one echo each, of one name and one grid.

    Returns
    -------
    list of list of EchoFile
        Files that state an echo time more than once are parted by series or acquisition number;
        where that does not help they stay together, to be refused.
    """
    groups: defaultdict[tuple[object, ...], list[EchoFile]] = defaultdict(list)
    for echo in echoes:
        groups[_family(echo)].append(echo)
    return [part for group in groups.values() for part in _split_repeats(group)]


def _family(echo: EchoFile) -> tuple[object, ...]:
    folder = echo.file.path.parent
    if echo.parts.is_bids:
        shared = {k: v for k, v in echo.parts.entities.items() if k not in ("echo", "part")}
        return (folder, echo.parts.suffix, *sorted(shared.items()))
    sidecar = echo.sidecar
    return (
        folder,
        echo.file.shape,
        tuple(np.round(echo.file.affine_mm, 2).ravel() + 0.0),
        text(sidecar, "ProtocolName", "SeriesDescription"),
        words(sidecar, "ScanningSequence"),
        number(sidecar, "RepetitionTime", "RepetitionTimeExcitation"),
        number(sidecar, "FlipAngle"),
        number(sidecar, "MagneticFieldStrength"),
    )


def _split_repeats(group: list[EchoFile]) -> list[list[EchoFile]]:
    if _has_each_echo_once(group):
        return [group]
    for key in ("SeriesNumber", "AcquisitionNumber"):
        parts: defaultdict[float | None, list[EchoFile]] = defaultdict(list)
        for echo in group:
            parts[number(echo.sidecar, key)].append(echo)
        if len(parts) > 1 and all(map(_has_each_echo_once, parts.values())):
            n_echoes = {len(part) for part in parts.values()}
            if max(n_echoes) > 1:
                return list(parts.values())
    return [group]


def _has_each_echo_once(group: Sequence[EchoFile]) -> bool:
    times = [time for echo in group for time in echo.times_ms]
    return len(set(times)) == len(times)
