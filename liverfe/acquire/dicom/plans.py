"""Headers of DICOM images -> plans of stacks."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from liverfe.acquire.dicom.candidates import (
    Candidate,
    cells,
    split_by_geometry,
    split_repeats,
)
from liverfe.acquire.dicom.duplicates import drop_duplicates
from liverfe.acquire.dicom.geometry import (
    SAME_PLACE_MM,
    Slices,
    cluster,
    grid_of,
    places,
    settle_slices,
)
from liverfe.acquire.dicom.given import assign_echo_times
from liverfe.acquire.dicom.header import ImageHeader
from liverfe.acquire.dicom.header_checks import check_headers, name_of
from liverfe.acquire.dicom.joining import join_series
from liverfe.acquire.dicom.left_out import set_aside
from liverfe.acquire.echo_times import in_words
from liverfe.acquire.plan import SourceImage, StackPlan
from liverfe.acquire.size import check_size
from liverfe.echoes import Acquisition, LeftOut, settle_field_strength
from liverfe.errors import Finding

_TOLERABLE_SHIFT = 0.25
"""A slice may lie this share of the slice distance off its even place; more, and outlines meet
the wrong slice."""


_NO_TABLE = frozenset(
    {
        "echo-time-repeated",
        "repeats-unseparated",
        "coils-uncombined",
        "echo-order-unknown",
        "echo-times-count",
    }
)
"""Findings after which images cannot be put into an echo x slice table."""


def plan_dicom(
    images: Sequence[ImageHeader],
    *,
    echo_times_ms: tuple[float, ...] | None,
    field_strength_t: float | None,
) -> tuple[list[StackPlan], list[LeftOut]]:
    """Plan the stacks of all DICOM images of an input.

    Parameters
    ----------
    images : sequence of ImageHeader
        In any order.
    echo_times_ms : tuple of float or None
        As the user states them.
    field_strength_t : float or None
        As the user states it.

    Returns
    -------
    plans : list of StackPlan
        One for each acquisition of each study.
    left_out : list of LeftOut
        Images that belong to none.
    """
    kept, n_dropped, conflicts = drop_duplicates(images)
    studies: defaultdict[str, list[ImageHeader]] = defaultdict(list)
    for image in kept:
        studies[image.study_uid].append(image)
    plans: list[StackPlan] = []
    left_out: list[LeftOut] = []
    for study_uid, found in studies.items():
        common = [conflicts[study_uid]] if study_uid in conflicts else []
        if n_dropped:
            common.append(Finding.of("duplicates-dropped", n_files=n_dropped))
        if len({image.subject.patient_id for image in found}) > 1:
            common.append(Finding.of("patients-mixed", series=found[0].series))
        magnitude, aside = set_aside(found)
        left_out += aside
        if not magnitude:
            plans.append(_plan_without_magnitude(found, aside, common))
        for candidate in find_candidates(magnitude, echo_times_ms):
            plans.append(_plan(candidate, aside, common, field_strength_t))
    if n_dropped:
        left_out.append(
            LeftOut(what="duplicate files", n_files=n_dropped, why="the same image is there twice")
        )
    return plans, left_out


def _plan_without_magnitude(
    images: Sequence[ImageHeader], left_out: Sequence[LeftOut], common: Sequence[Finding]
) -> StackPlan:
    """Refuse a study of phase, real, imaginary or derived images alone, and say so."""
    kinds = ", ".join(sorted({image.kind for image in images}))
    refusal = Finding.of("no-magnitude", series=images[0].series, kinds=kinds)
    return StackPlan(
        layout=f"DICOM, no magnitude image among {len(images)}",
        echo_times_ms=(),
        grid=None,
        shape=None,
        present=np.zeros((0, 0), dtype=bool),
        acquisition=images[0].acquisition,
        subject=images[0].subject,
        left_out=tuple(left_out),
        findings=(*common, refusal),
        refusal=next((f for f in common if f.level == "stop"), refusal),
        origin="dicom",
    )


def find_candidates(
    images: Sequence[ImageHeader], echo_times_ms: tuple[float, ...] | None = None
) -> list[Candidate]:
    """Sort the magnitude images of one study into acquisitions."""
    series: defaultdict[str, list[ImageHeader]] = defaultdict(list)
    for image in images:
        series[image.series_uid].append(image)
    parts = [part for found in series.values() for part in split_by_geometry(found)]
    if echo_times_ms:
        parts = [assign_echo_times(part, echo_times_ms) for part in parts]
    single = [part for candidate in parts for part in split_repeats(candidate)]
    return join_series(single)


def _plan(
    candidate: Candidate,
    left_out: Sequence[LeftOut],
    common: Sequence[Finding],
    given_field_t: float | None,
) -> StackPlan:
    acquisition, field_findings = _settle_acquisition(candidate, given_field_t)
    findings = [*common, *check_headers(candidate), *field_findings]
    if candidate.n_joined > 1:
        findings.append(
            Finding.of(
                "series-joined", series=_series_in_words(candidate), n_series=candidate.n_joined
            )
        )
    times = candidate.echo_times_ms
    parts: tuple[ImageHeader, ...] = tuple(candidate.images)
    sources = tuple(
        SourceImage(path=i.path, frame=i.pixels.frame, echo=0, slice_index=0) for i in parts
    )
    present: NDArray[np.bool_] = np.zeros((len(times), 0), dtype=bool)
    grid = shape = None
    is_ordered = not any(finding.code in _NO_TABLE for finding in findings)
    if candidate.has_geometry and candidate.is_timed and is_ordered:
        slices = settle_slices(cluster(places(parts)[:, 0].tolist(), SAME_PLACE_MM))
        parts, sources, present = _place(candidate, slices)
        grid = grid_of(parts, slices)
        shape = (parts[0].pixels.columns, parts[0].pixels.rows, len(slices.places_mm))
        findings += [*_slice_findings(candidate, slices, grid), *_holes(candidate, slices, present)]
        findings += check_size(shape, len(times), where=candidate.first.series)
    refusal = next((finding for finding in findings if finding.level == "stop"), None)
    return StackPlan(
        layout=_layout(candidate),
        echo_times_ms=tuple(times),
        grid=grid,
        shape=shape,
        present=present,
        acquisition=acquisition,
        subject=candidate.first.subject,
        left_out=tuple(left_out),
        findings=tuple(dict.fromkeys(findings)),
        sources=sources,
        refusal=refusal,
        origin="dicom",
        parts=parts,
    )


def _place(
    candidate: Candidate, slices: Slices
) -> tuple[tuple[ImageHeader, ...], tuple[SourceImage, ...], NDArray[np.bool_]]:
    """Give every image its echo and slice; ordered by echo, then slice."""
    placed: list[tuple[int, int, ImageHeader]] = []
    where = np.array(slices.places_mm)
    for (echo, _), images in cells(candidate.images).items():
        for image in images:
            place = places([image])[0, 0]
            placed.append((echo, int(np.argmin(np.abs(where - place))), image))
    placed.sort(key=lambda entry: entry[:2])
    present = np.zeros((len(candidate.echo_times_ms), len(where)), dtype=bool)
    for echo, k, _ in placed:
        present[echo, k] = True
    sources = tuple(
        SourceImage(path=image.path, frame=image.pixels.frame, echo=echo, slice_index=k)
        for echo, k, image in placed
    )
    return tuple(image for *_, image in placed), sources, present


def _settle_acquisition(
    candidate: Candidate, given_field_t: float | None
) -> tuple[Acquisition, list[Finding]]:
    first, series = candidate.first, candidate.first.series
    stated = next((i.stated_field_t for i in candidate.images if i.stated_field_t), None)
    field_t, found = settle_field_strength(stated, first.acquisition.imaging_frequency_mhz)
    findings = list(found)
    if given_field_t is not None:
        if field_t is None and stated is None:
            field_t = given_field_t
            findings.append(Finding.of("field-given", where=series, given=f"{given_field_t:g}"))
        elif field_t is None or abs(field_t - given_field_t) > 0.02:
            findings.append(
                Finding.of(
                    "field-given-conflict",
                    where=series,
                    given=f"{given_field_t:g}",
                    stated=f"{field_t if field_t is not None else stated:.4g}",
                )
            )
    elif field_t is None and stated is None:
        findings.append(
            Finding.of("field-missing", where=series, tag="(0018,0087) MagneticFieldStrength")
        )
    return replace(first.acquisition, field_strength_t=field_t), findings


def _slice_findings(candidate: Candidate, slices: Slices, grid: object) -> Iterable[Finding]:
    series = candidate.first.series
    if grid is None:
        yield Finding.of("slice-distance-missing", file=name_of(candidate.first), series=series)
    where = slices.places_mm
    if len(where) > 2 and slices.worst_shift_mm > SAME_PLACE_MM:
        step = (where[-1] - where[0]) / (len(where) - 1)
        is_tolerable = slices.worst_shift_mm <= _TOLERABLE_SHIFT * step
        code = "uneven-slice-gaps" if is_tolerable else "slices-not-a-stack"
        yield Finding.of(
            code, series=series, shift=f"{slices.worst_shift_mm:.2f}", step=f"{step:.2f}"
        )


def _holes(candidate: Candidate, slices: Slices, present: NDArray[np.bool_]) -> Iterable[Finding]:
    series = candidate.first.series
    is_empty: NDArray[np.bool_] = np.asarray(~present.any(axis=0))
    if is_empty.any():
        yield Finding.of(
            "slices-missing", series=series, n=int(is_empty.sum()), places=_in_mm(slices, is_empty)
        )
    is_hole = ~present & ~is_empty
    if not is_hole.any() or len(present) < 2:
        return
    times = candidate.echo_times_ms
    lacking: NDArray[np.bool_] = np.asarray(is_hole.any(axis=0))
    k = int(np.argmax(lacking))
    normal_place = slices.places_mm[k]
    example = min(candidate.images, key=lambda i: abs(places([i])[0, 0] - normal_place))
    code = "holes-in-echo-table" if present.all(axis=0).any() else "no-complete-slice"
    yield Finding.of(
        code,
        series=series,
        n_missing=int(is_hole.sum()),
        times=in_words([times[e] for e in np.flatnonzero(is_hole.any(axis=1))]),
        places=_in_mm(slices, lacking),
        file=name_of(example),
        tag="(0018,0081) EchoTime and (0020,0032) ImagePositionPatient",
    )


def _in_mm(slices: Slices, which: NDArray[np.bool_], most: int = 6) -> str:
    chosen = [slices.places_mm[k] for k in np.flatnonzero(which)]
    shown = ", ".join(f"{place:.1f}" for place in chosen[:most])
    return f"{shown}, ..." if len(chosen) > most else shown


def _series_in_words(candidate: Candidate) -> str:
    numbers = sorted({image.series_number or 0 for image in candidate.images})
    shown = [str(number) for number in numbers]
    return shown[0] if len(shown) == 1 else f"{', '.join(shown[:-1])} and {shown[-1]}"


def _layout(candidate: Candidate) -> str:
    n_frames = {image.pixels.n_frames for image in candidate.images}
    kind = "DICOM, one image a file" if n_frames == {1} else "enhanced DICOM, many frames a file"
    if candidate.n_joined > 1:
        is_single = all(size == 1 for size in candidate.series_sizes)
        what = "one series an echo" if is_single else "the echoes in several series"
        found = f"{what}: series {_series_in_words(candidate)} joined"
    else:
        found = f"all echoes in {candidate.first.series}"
    return "; ".join((kind, found, *candidate.how))
