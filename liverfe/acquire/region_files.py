"""Region files: which there are, what kind each is, and whether they fit the images."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from pathlib import Path

from liverfe.acquire.naming import shown_name
from liverfe.acquire.outline_file import KIND, read_outlines
from liverfe.acquire.walk import list_files
from liverfe.errors import Finding, StudyRefused, UsageError
from liverfe.grid import Grid
from liverfe.outlines import Region

_N_KIND_WITHIN = 4096
"""The kind of an outline file stands near its start."""

_LABEL_WORDS = ("regions", "dseg")
"""Words in the name of a label image that belongs to a study."""


def read_regions(path: Path) -> tuple[Region, ...]:
    """Read the regions of a file: a NIfTI label image or an outline file, told by content.

    Parameters
    ----------
    path : Path
        The file.

    Returns
    -------
    tuple of Region
        At least one.

    Raises
    ------
    UsageError
        If the file does not exist.
    StudyRefused
        If it is neither, damaged, or not as it should be.
    """
    if not path.is_file():
        raise UsageError(f"region file {path.name!r} does not exist; check the path.")
    files, _ = list_files([path])
    content = files[0].content if files else "other"
    if content == "nifti":
        # Late, since nibabel takes a third of a second to import.
        from liverfe.acquire.label_image import read_label_image  # noqa: PLC0415

        return read_label_image(path)
    if content == "json":
        return read_outlines(path)
    reason = "it is neither a NIfTI label image nor an outline file"
    raise StudyRefused(Finding.of("region-file-unreadable", file=shown_name(path), reason=reason))


def find_regions(inputs: Sequence[Path]) -> tuple[Path, ...]:
    """Find the region files of a study's own folder.

    Parameters
    ----------
    inputs : sequence of Path
        The study's files and folders.

    Returns
    -------
    tuple of Path
        Outline files, and NIfTI files with ``regions`` or ``dseg`` in their name; sorted.

    Raises
    ------
    UsageError
        If an input does not exist.
    """
    files, _ = list_files([Path(given) for given in inputs])
    found = [
        file.path
        for file in files
        if (file.content == "json" and _is_outline_file(file.path))
        or (file.content == "nifti" and any(w in file.path.name.lower() for w in _LABEL_WORDS))
    ]
    return tuple(sorted(found))


def check_frame_of_reference(regions: Iterable[Region], grid: Grid) -> None:
    """Refuse a region that was drawn on another frame of reference than the images.

    Where either names none (NIfTI), there is nothing to compare.

    Parameters
    ----------
    regions : iterable of Region
        The regions.
    grid : Grid
        Of the images.

    Raises
    ------
    StudyRefused
        With ``frame-of-reference-differs``.
    """
    for region in regions:
        drawn_on, images = region.frame_of_reference_uid, grid.frame_of_reference_uid
        if drawn_on and images and drawn_on != images:
            raise StudyRefused(Finding.of("frame-of-reference-differs", region=region.name))


def _is_outline_file(path: Path) -> bool:
    with path.open("rb") as file:
        return f'"{KIND}"'.encode() in file.read(_N_KIND_WITHIN)
