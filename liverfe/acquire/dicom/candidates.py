"""Which images of a series belong to one acquisition: geometry first, then repeats.

Nothing here looks at file names, instance numbers or echo numbers.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Hashable, Sequence
from dataclasses import dataclass, field, replace
from itertools import pairwise

from liverfe.acquire.dicom.geometry import (
    SAME_PLACE_MM,
    cluster,
    is_one_line,
    is_plane,
    is_same_plane,
    places,
)
from liverfe.acquire.dicom.header import ImageHeader
from liverfe.errors import Finding

_SAME_ECHO_TIME_MS = 0.01
"""Echo times nearer than this are one echo: rounding; real echo spacings are above 0.5 ms."""

_SAME_ECHO_TIME_SHARE = 0.01
"""The same as a share of the longest echo time, for times that are not in ms."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Candidate:
    """Images that may make up one stack.

    Attributes
    ----------
    images : tuple of ImageHeader
        In no order.
    findings : tuple of Finding
        What was found while they were put together.
    how : tuple of str
        Parts of the layout in words, for example ``repeat 2 of 2, told apart by ...``.
    n_joined : int
        Number of series that were joined.
    """

    images: tuple[ImageHeader, ...]
    findings: tuple[Finding, ...] = ()
    how: tuple[str, ...] = ()
    n_joined: int = 1
    series_sizes: tuple[int, ...] = field(default=(), repr=False)

    @property
    def echo_times_ms(self) -> list[float]:
        """Distinct echo times, ascending."""
        return cluster_times(self.images)

    @property
    def first(self) -> ImageHeader:
        """Any one of the images: what holds for all may be read from it."""
        return self.images[0]

    @property
    def has_geometry(self) -> bool:
        """Whether every image says where it lies."""
        return all(
            i.position_mm
            and i.spacing_mm
            and i.orientation
            and is_plane(i.orientation)
            and min(i.pixels.rows, i.pixels.columns) > 0
            for i in self.images
        )

    @property
    def is_timed(self) -> bool:
        """Whether every image says its echo time."""
        return all(i.echo_time_ms is not None for i in self.images)


def split_by_geometry(images: Sequence[ImageHeader]) -> list[Candidate]:
    """Part the images of one series by matrix, orientation and line of slices.

    Images without position or echo time stay together: they are refused as a whole.
    """
    whole = Candidate(images=tuple(images))
    if not whole.has_geometry or not whole.is_timed:
        return [whole]
    planes: list[list[ImageHeader]] = []
    for image in images:
        for plane in planes:
            if is_same_plane(plane[0], image):
                plane.append(image)
                break
        else:
            planes.append([image])
    return [Candidate(images=tuple(part)) for plane in planes for part in _lines(plane)]


def _lines(images: list[ImageHeader]) -> list[list[ImageHeader]]:
    if is_one_line(images):
        return [images]
    parts: defaultdict[tuple[int, int], list[ImageHeader]] = defaultdict(list)
    for image, place in zip(images, places(images), strict=True):
        parts[round(place[1] / SAME_PLACE_MM), round(place[2] / SAME_PLACE_MM)].append(image)
    return list(parts.values())


def cluster_times(images: Sequence[ImageHeader]) -> list[float]:
    """Distinct echo times of images in ms, ascending."""
    stated = [i.echo_time_ms for i in images if i.echo_time_ms is not None]
    return cluster(stated, same_time_ms(stated))


def same_time_ms(times_ms: Sequence[float]) -> float:
    """How near two of these echo times are when they are the same."""
    return min(_SAME_ECHO_TIME_MS, _SAME_ECHO_TIME_SHARE * max(times_ms, default=0.0))


def cells(images: Sequence[ImageHeader]) -> dict[tuple[int, int], list[ImageHeader]]:
    """Sort images into the cells of their echo x slice table."""
    times = cluster_times(images)
    where = places(images)[:, 0]
    slices = cluster(where.tolist(), SAME_PLACE_MM)
    table: defaultdict[tuple[int, int], list[ImageHeader]] = defaultdict(list)
    for image, place in zip(images, where, strict=True):
        assert image.echo_time_ms is not None
        table[_nearest(times, image.echo_time_ms), _nearest(slices, place)].append(image)
    return dict(table)


def _nearest(centres: Sequence[float], value: float) -> int:
    return min(range(len(centres)), key=lambda i: abs(centres[i] - value))


def split_repeats(candidate: Candidate) -> list[Candidate]:
    """Part images that lie more than once at the same echo time and place.

    Acquisition number, temporal position and acquisition time are tried in this order; a split
    is believed only if every part then has each image once.

    Returns
    -------
    list of Candidate
        One each repeat; the candidate itself, with a stop finding, where nothing tells them apart.
    """
    is_judged = any(finding.level == "stop" for finding in candidate.findings)
    if is_judged or not candidate.has_geometry or not candidate.is_timed:
        return [candidate]
    table = cells(candidate.images)
    n_repeats = max(len(images) for images in table.values())
    if n_repeats == 1:
        return [candidate]
    crowded = next(images for images in table.values() if len(images) == n_repeats)
    facts = {
        "series": candidate.first.series,
        "n_images": n_repeats,
        "time": f"{crowded[0].echo_time_ms:g}",
    }
    if len({image.coil for image in crowded}) == n_repeats:
        return [replace(candidate, findings=(Finding.of("coils-uncombined", **facts),))]
    if len(candidate.echo_times_ms) == 1:
        return [replace(candidate, findings=(Finding.of("echo-time-repeated", **facts),))]
    for name, key in _REPEAT_KEYS:
        parts = _parts(candidate.images, key)
        if len(parts) == n_repeats and all(_is_single(part) for part in parts):
            return [_repeat(candidate, part, k, n_repeats, name) for k, part in enumerate(parts)]
    ranked = _ranked_by_time(table, n_repeats)
    if ranked:
        name = "acquisition time (0008,0032)"
        return [_repeat(candidate, part, k, n_repeats, name) for k, part in enumerate(ranked)]
    return [replace(candidate, findings=(Finding.of("repeats-unseparated", **facts),))]


_REPEAT_KEYS: tuple[tuple[str, Callable[[ImageHeader], Hashable]], ...] = (
    ("acquisition number (0020,0012)", lambda image: image.acquisition_number),
    ("temporal position (0020,0100)", lambda image: image.temporal_position),
)


def _repeat(
    candidate: Candidate, part: Sequence[ImageHeader], index: int, n_repeats: int, name: str
) -> Candidate:
    how = (*candidate.how, f"repeat {index + 1} of {n_repeats}, told apart by {name}")
    return replace(candidate, images=tuple(part), how=how)


def _parts(
    images: Sequence[ImageHeader], key: Callable[[ImageHeader], Hashable]
) -> list[list[ImageHeader]]:
    parts: defaultdict[Hashable, list[ImageHeader]] = defaultdict(list)
    for image in images:
        parts[key(image)].append(image)
    return [parts[value] for value in sorted(parts, key=lambda v: (v is not None, v))]


def _is_single(images: Sequence[ImageHeader]) -> bool:
    return max(map(len, cells(images).values())) == 1


def _ranked_by_time(
    table: dict[tuple[int, int], list[ImageHeader]], n_repeats: int
) -> list[list[ImageHeader]]:
    """Part by time where one repeat ends before the next begins; empty where it does not."""
    parts: list[list[ImageHeader]] = [[] for _ in range(n_repeats)]
    for images in table.values():
        if any(image.time_s is None for image in images) or len(images) != n_repeats:
            return []
        ordered = sorted(images, key=lambda image: image.time_s or 0.0)
        for part, image in zip(parts, ordered, strict=True):
            part.append(image)
    spans = [(min(t), max(t)) for t in ([i.time_s or 0.0 for i in part] for part in parts)]
    follows = (a[1] < b[0] for a, b in pairwise(spans))
    return parts if all(follows) else []
