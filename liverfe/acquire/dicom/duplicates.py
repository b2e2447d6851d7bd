"""The same image twice: dropped where the bytes say so, quarantined where they do not."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Sequence
from pathlib import Path

from liverfe.acquire.dicom.header import ImageHeader
from liverfe.acquire.naming import shown_name
from liverfe.errors import Finding


def drop_duplicates(
    images: Sequence[ImageHeader],
) -> tuple[list[ImageHeader], int, dict[str, Finding]]:
    """Drop images that are there twice.

    Two files with one SOP instance UID must hold the same pixels and say the same about them.

    Parameters
    ----------
    images : sequence of ImageHeader
        Of all files.

    Returns
    -------
    kept : list of ImageHeader
        Each image once.
    n_dropped : int
        Number of files that were dropped.
    conflicts : dict of str to Finding
        A stop finding for each study UID in which one UID names different images.
    """
    by_uid: defaultdict[str, dict[Path, list[ImageHeader]]] = defaultdict(dict)
    kept: list[ImageHeader] = []
    for image in images:
        if image.sop_instance:
            by_uid[image.sop_instance].setdefault(image.path, []).append(image)
        else:
            kept.append(image)
    conflicts: dict[str, Finding] = {}
    n_dropped = 0
    for copies in by_uid.values():
        (path, first), *others = copies.items()
        kept += first
        for other_path, other in others:
            if not _says_the_same(first[0], other[0]) or _pixels(first[0]) != _pixels(other[0]):
                finding = Finding.of(
                    "same-uid-different-image",
                    file=shown_name(path, first[0].person),
                    other=shown_name(other_path, other[0].person),
                )
                for image in (first[0], other[0]):
                    conflicts.setdefault(image.study_uid, finding)
                kept += other
            else:
                n_dropped += 1
    return kept, n_dropped, conflicts


def _says_the_same(a: ImageHeader, b: ImageHeader) -> bool:
    """Copies may differ in what an archive adds, but not in what decides the decay."""
    if a.pixels.header_digest == b.pixels.header_digest:
        return True
    return (
        (a.echo_time_ms, a.position_mm, a.orientation, a.kind, a.subject.patient_id)
        == (b.echo_time_ms, b.position_mm, b.orientation, b.kind, b.subject.patient_id)
        and (a.scaling.slope, a.scaling.intercept) == (b.scaling.slope, b.scaling.intercept)
        and a.pixels.transfer_syntax == b.pixels.transfer_syntax
    )


def _pixels(image: ImageHeader) -> bytes:
    with image.path.open("rb") as file:
        file.seek(image.pixels.offset)
        return file.read()
