"""Which series hold the echoes of one acquisition: scanners may write one series an echo."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from liverfe.acquire.dicom.candidates import Candidate, same_time_ms
from liverfe.acquire.dicom.geometry import (
    SAME_PLACE_MM,
    cluster,
    is_one_line,
    is_same_plane,
    places,
)
from liverfe.acquire.dicom.header import ImageHeader
from liverfe.errors import Finding

_SAME_REPETITION = 0.01
"""Repetition times that differ by a smaller share are the same."""

_APART_S = 5.0
"""Series that start this long after the other ended were acquired separately."""

_A_STACK_OF_ITS_OWN = 3
"""From this many echoes on, a series is a measurement by itself and is not joined lightly."""


def join_series(candidates: Sequence[Candidate]) -> list[Candidate]:
    """Join series of one geometry and sequence whose echo times are distinct.

    Scanners that write one series an echo, or two interleaved echo trains, leave the echoes of
    one acquisition in several series.

    Parameters
    ----------
    candidates : sequence of Candidate
        Of one study.

    Returns
    -------
    list of Candidate
        Joined where they belong together, in order of acquisition.
    """
    joined: list[Candidate] = []
    for candidate in sorted(candidates, key=_order):
        homes = [i for i, home in enumerate(joined) if may_join(home, candidate)]
        if not homes:
            joined.append(replace(candidate, series_sizes=(len(candidate.echo_times_ms),)))
            continue
        home = joined[homes[0]]
        findings = [*home.findings, *candidate.findings]
        if _gap_s(home, candidate) > _APART_S:
            findings.append(Finding.of("echoes-acquired-apart", series=candidate.first.series))
        if len(homes) > 1:
            findings.append(Finding.of("join-ambiguous", series=candidate.first.series))
        joined[homes[0]] = replace(
            home,
            images=home.images + candidate.images,
            findings=tuple(dict.fromkeys(findings)),
            n_joined=home.n_joined + 1,
            series_sizes=(*home.series_sizes, len(candidate.echo_times_ms)),
        )
    return joined


def _order(candidate: Candidate) -> tuple[float, int, str]:
    times = [image.time_s for image in candidate.images if image.time_s is not None]
    first = candidate.first
    return (min(times, default=0.0), first.series_number or 0, first.series_uid)


def may_join(home: Candidate, other: Candidate) -> bool:
    """Tell whether `other` holds further echoes of the acquisition in `home`."""
    a, b = home.first, other.first
    if not (home.has_geometry and other.has_geometry and home.is_timed and other.is_timed):
        return False
    if any(f.level == "stop" for f in (*home.findings, *other.findings)):
        return False
    is_alike = (
        (a.study_uid, a.frame_of_reference) == (b.study_uid, b.frame_of_reference)
        and is_same_plane(a, b)
        and _has_same_sequence(a, b)
        and is_one_line((*home.images, *other.images))
    )
    if not is_alike or not _share_slices(home, other):
        return False
    times_a, times_b = home.echo_times_ms, other.echo_times_ms
    tolerance_ms = same_time_ms((*times_a, *times_b))
    if any(abs(p - q) <= tolerance_ms for p in times_a for q in times_b):
        return False
    sizes = (*home.series_sizes, len(times_b))
    if all(size == 1 for size in sizes):
        return True
    gap_s = _gap_s(home, other)
    is_interleaved = min(times_a) < max(times_b) and min(times_b) < max(times_a)
    if min(len(times_a), len(times_b)) < _A_STACK_OF_ITS_OWN:
        return gap_s <= _APART_S
    return is_interleaved and gap_s <= 0.0


def _has_same_sequence(a: ImageHeader, b: ImageHeader) -> bool:
    p, q = a.acquisition, b.acquisition
    if (a.scanning_sequence, a.sequence_variant) != (b.scanning_sequence, b.sequence_variant):
        return False
    if (p.sequence, p.flip_angle_deg) != (q.sequence, q.flip_angle_deg):
        return False
    if a.stated_field_t != b.stated_field_t or p.acquired_matrix != q.acquired_matrix:
        return False
    if p.repetition_time_ms is None or q.repetition_time_ms is None:
        return p.repetition_time_ms == q.repetition_time_ms
    return abs(p.repetition_time_ms / q.repetition_time_ms - 1) < _SAME_REPETITION


def _share_slices(home: Candidate, other: Candidate) -> bool:
    """At least half of the smaller one's slices lie where the other has one."""
    found = [cluster(places(c.images)[:, 0].tolist(), SAME_PLACE_MM) for c in (home, other)]
    few, many = sorted(found, key=len)
    n_shared = sum(any(abs(p - q) <= SAME_PLACE_MM for q in many) for p in few)
    return 2 * n_shared > len(few)


def _gap_s(home: Candidate, other: Candidate) -> float:
    """Seconds between the end of one and the start of the other; 0 where they overlap."""
    spans = []
    for candidate in (home, other):
        times = [image.time_s for image in candidate.images if image.time_s is not None]
        if not times:
            return 0.0
        spans.append((min(times), max(times)))
    (a0, a1), (b0, b1) = spans
    return max(0.0, b0 - a1, a0 - b1)
