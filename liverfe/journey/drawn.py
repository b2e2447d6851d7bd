"""Which regions belong to a study: named outright, found in the input, or kept for its key."""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from liverfe.acquire import InputFile, find_regions, read_regions
from liverfe.errors import Finding, StudyRefused
from liverfe.outlines import LabelMask, Region

_SUFFIXES = (".json", ".nii", ".nii.gz")
"""Region files of a study's own folder under ``regions``."""


@dataclass(frozen=True, slots=True, kw_only=True)
class DrawnRegions:
    """The regions of a study and the files that they came from.

    Attributes
    ----------
    regions : tuple of Region
        In the order of their files.
    inputs : tuple of InputFile
        All files that were read for them, for the manifest.
    findings : tuple of Finding
        What was done where the same regions came in two forms.
    """

    regions: tuple[Region, ...] = ()
    inputs: tuple[InputFile, ...] = ()
    findings: tuple[Finding, ...] = ()


def find_region_files(
    inputs: Sequence[Path], *, out: Path, key: str, named: Path | None = None
) -> tuple[Path, ...]:
    """Tell which files hold the regions of a study.

    Parameters
    ----------
    inputs : sequence of Path
        The study's files and folders.
    out : Path
        The output folder; regions of this study may lie in ``regions/<key>`` there.
    key : str
        Study key.
    named : Path, optional
        The file that the user named: then only this one.

    Returns
    -------
    tuple of Path
        Sorted; empty where there is none.
    """
    if named is not None:
        return (named,)
    inside = find_regions(inputs)
    return tuple(sorted(inside)) or kept_regions(out, key)


def kept_regions(out: Path, key: str) -> tuple[Path, ...]:
    """List the region files that are kept for a study in the output folder.

    Parameters
    ----------
    out : Path
        The output folder.
    key : str
        Study key; for ``<key>-2`` regions of ``<key>`` serve where it has none of its own.

    Returns
    -------
    tuple of Path
        Sorted by name.
    """
    for folder in dict.fromkeys((key, key.split("-")[0])):
        place = out / "regions" / folder
        if place.is_dir():
            found = sorted(
                path
                for path in place.iterdir()
                if path.is_file() and path.name.endswith(_SUFFIXES) and path.name[0] != "."
            )
            if found:
                return tuple(found)
    return ()


def read_drawn_regions(files: Sequence[Path]) -> DrawnRegions:
    """Read the regions of all `files`, each file hashed before and after.

    Parameters
    ----------
    files : sequence of Path
        From `find_region_files`.

    Returns
    -------
    DrawnRegions
        All of them. Where a label image and an outline file hold the same names, the label image
        counts: its voxels need no rasterising.

    Raises
    ------
    StudyRefused
        If a file changes while it is read, or two files of one kind name the same region.
    """
    read = [(path, *_read_steady(path)) for path in files]
    labels = [entry for entry in read if isinstance(entry[1][0].shape, LabelMask)]
    outlines = [entry for entry in read if entry not in labels]
    doubled = [entry for entry in outlines if _names(entry) & _names(*labels)]
    used = [entry for entry in read if entry not in doubled]
    _refuse_same_names(used, n_files=len(files))
    findings = [
        Finding.of(
            "regions-in-two-forms",
            used=", ".join(path.name for path, *_ in labels),
            unused=path.name,
        )
        for path, *_ in doubled
    ]
    return DrawnRegions(
        regions=tuple(region for _, regions, _ in used for region in regions),
        inputs=tuple(source for _, _, source in read),
        findings=tuple(findings),
    )


_Read = tuple[Path, tuple[Region, ...], InputFile]


def _names(*entries: _Read) -> set[str]:
    return {region.name.casefold() for _, regions, _ in entries for region in regions}


def _refuse_same_names(entries: Sequence[_Read], *, n_files: int) -> None:
    seen: set[str] = set()
    for entry in entries:
        twice = sorted(seen & _names(entry))
        if twice:
            raise StudyRefused(
                Finding.of(
                    "regions-ambiguous",
                    count=n_files,
                    files=", ".join(path.name for path, *_ in entries),
                    name=twice[0],
                )
            )
        seen |= _names(entry)


def hash_file(path: Path) -> InputFile:
    """Hash a file as it is now.

    Parameters
    ----------
    path : Path
        The file.

    Returns
    -------
    InputFile
        With SHA-256 and size.
    """
    with path.open("rb") as file:
        digest = hashlib.file_digest(file, "sha256").hexdigest()
        return InputFile(path=path, sha256=digest, n_bytes=file.tell())


def _read_steady(path: Path) -> tuple[tuple[Region, ...], InputFile]:
    # A reader may be saving at this moment; once more is enough for a save, and endless is not.
    for _ in range(2):
        before = hash_file(path)
        regions = read_regions(path)
        if hash_file(path) == before:
            return regions, before
    raise StudyRefused(Finding.of("regions-changing", file=path.name))
