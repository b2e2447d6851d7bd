"""Echo times and field strength that a user states for DICOM files that lack them."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable
from dataclasses import replace

from liverfe.acquire.dicom.candidates import Candidate, same_time_ms
from liverfe.acquire.dicom.geometry import SAME_PLACE_MM, cluster, places
from liverfe.acquire.dicom.header import ImageHeader
from liverfe.acquire.echo_times import in_words
from liverfe.errors import Finding

_ORDERS: tuple[tuple[str, Callable[[ImageHeader], int | None]], ...] = (
    ("echo number (0018,0086)", lambda image: image.echo_number),
    ("raw run number (0019,10A2)", lambda image: image.raw_run),
    ("instance number (0020,0013)", lambda image: image.instance_number),
)
"""What can order the images of one place where the echo time does not; the first that differs."""


def assign_echo_times(candidate: Candidate, times_ms: tuple[float, ...]) -> Candidate:
    """Give the images of one series the echo times that the user states.

    Parameters
    ----------
    candidate : Candidate
        Images of one series and geometry.
    times_ms : tuple of float
        Ascending, in ms.

    Returns
    -------
    Candidate
        With those echo times and a note that says how they were ordered; or unchanged with a stop
        finding where the files contradict them or nothing orders the images.
    """
    stated = candidate.echo_times_ms
    series = candidate.first.series
    if candidate.is_timed and len(stated) > 1:
        if len(stated) == len(times_ms) and all(
            abs(a - b) <= same_time_ms(times_ms) for a, b in zip(stated, times_ms, strict=True)
        ):
            return candidate
        conflict = Finding.of(
            "echo-times-conflict", where=series, stated=in_words(stated), given=in_words(times_ms)
        )
        return replace(candidate, findings=(*candidate.findings, conflict))
    if not candidate.has_geometry:
        return candidate
    columns = _by_place(candidate)
    crowds = {len(images) for images in columns}
    if crowds != {len(times_ms)}:
        wrong = Finding.of(
            "echo-times-count", where=series, n_given=len(times_ms), n_there=max(crowds)
        )
        return replace(candidate, findings=(*candidate.findings, wrong))
    for name, key in _ORDERS:
        if all(_is_ordering(images, key) for images in columns):
            images = tuple(
                replace(image, echo_time_ms=time)
                for column in columns
                for image, time in zip(sorted(column, key=_as_int(key)), times_ms, strict=True)
            )
            note = Finding.of(
                "echo-times-given", where=series, given=in_words(times_ms, 24), order=name
            )
            return replace(candidate, images=images, findings=(*candidate.findings, note))
    lost = Finding.of("echo-order-unknown", where=series)
    return replace(candidate, findings=(*candidate.findings, lost))


def _by_place(candidate: Candidate) -> list[list[ImageHeader]]:
    where = places(candidate.images)[:, 0]
    centres = cluster(where.tolist(), SAME_PLACE_MM)
    columns: defaultdict[int, list[ImageHeader]] = defaultdict(list)
    for image, place in zip(candidate.images, where, strict=True):
        columns[min(range(len(centres)), key=lambda i: abs(centres[i] - place))].append(image)
    return list(columns.values())


def _is_ordering(images: list[ImageHeader], key: Callable[[ImageHeader], int | None]) -> bool:
    values = [key(image) for image in images]
    return None not in values and len(set(values)) == len(values)


def _as_int(key: Callable[[ImageHeader], int | None]) -> Callable[[ImageHeader], int]:
    return lambda image: key(image) or 0
