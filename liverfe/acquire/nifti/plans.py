"""NIfTI files -> plans of stacks."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np

from liverfe.acquire.echo_times import check_echo_times, in_words
from liverfe.acquire.naming import shown_name
from liverfe.acquire.nifti.candidates import (
    EchoFile,
    group_echoes,
    kind_of,
    open_echo_file,
    why_no_echo,
)
from liverfe.acquire.nifti.sidecar import (
    acquisition_of,
    is_echo_planar,
    is_spin_echo,
    number,
    subject_of,
    text,
)
from liverfe.acquire.nifti.volume import VolumePart, read_nifti_header
from liverfe.acquire.plan import SourceImage, StackPlan
from liverfe.acquire.size import check_size
from liverfe.acquire.walk import FoundFile
from liverfe.echoes import Acquisition, LeftOut, Subject, settle_field_strength
from liverfe.errors import Finding, StudyRefused
from liverfe.grid import Grid

_SAME_TIME_MS = 0.01

_SAME_PLACE_MM = 0.1


def plan_nifti(
    files: Sequence[FoundFile],
    *,
    echo_times_ms: tuple[float, ...] | None,
    field_strength_t: float | None,
) -> tuple[list[StackPlan], list[LeftOut]]:
    """Plan the stacks of all NIfTI files of an input.

    Parameters
    ----------
    files : sequence of FoundFile
        In the order given.
    echo_times_ms : tuple of float or None
        As the user states them.
    field_strength_t : float or None
        As the user states it.

    Returns
    -------
    plans : list of StackPlan
        Usable and refused ones.
    left_out : list of LeftOut
        Files that belong to none.
    """
    aside: Counter[tuple[str, str]] = Counter()
    plans: list[StackPlan] = []
    echoes: list[EchoFile] = []
    for found in files:
        reason = why_no_echo(found.path)
        if reason is not None:
            aside[reason] += 1
            continue
        try:
            file = read_nifti_header(found.path, found.n_bytes)
            echoes.append(open_echo_file(found, file))
        except StudyRefused as refused:
            plans.append(_refused(found, refused.findings[0]))
    chosen = _set_aside_components(echoes, aside)
    timed, untimed = _take_given_times(chosen, echo_times_ms)
    for group in group_echoes(timed):
        plans.append(_plan(group, echo_times_ms, field_strength_t))
    has_series = any(plan.refusal is None for plan in plans) or any(
        echo.file.shape[3] > 1 for echo in untimed
    )
    for echo in untimed:
        if has_series and echo.file.shape[3] == 1 and not echo.is_named:
            aside["NIfTI image", "nothing states its echo time"] += 1
        else:
            missing = Finding.of("nifti-echo-times-missing", file=echo.file.name)
            plans.append(_plan([echo], echo_times_ms, field_strength_t, missing))
    left_out = [LeftOut(what=what, n_files=n, why=why) for (what, why), n in aside.items()]
    return [replace(plan, left_out=tuple(left_out)) for plan in plans], left_out


def _set_aside_components(
    echoes: Sequence[EchoFile], aside: Counter[tuple[str, str]]
) -> list[EchoFile]:
    """Leave out phase, real, imaginary and derived files, unless there is nothing else."""
    kinds = [kind_of(echo) for echo in echoes]
    kept = [e for e, kind in zip(echoes, kinds, strict=True) if kind in ("magnitude", "unknown")]
    if not kept:
        return list(echoes)
    for kind in kinds:
        if kind not in ("magnitude", "unknown"):
            aside[f"{kind} image", "only magnitude decays as R2* says"] += 1
    return kept


def _take_given_times(
    echoes: Sequence[EchoFile], given: tuple[float, ...] | None
) -> tuple[list[EchoFile], list[EchoFile]]:
    """Give the user's echo times to files that state none."""
    timed = [echo for echo in echoes if echo.times_ms]
    untimed = [echo for echo in echoes if not echo.times_ms]
    if given is None:
        return timed, untimed
    if len(given) > 1:
        series = [echo for echo in untimed if echo.file.shape[3] > 1]
        timed += [echo.with_times(given) for echo in series]
        untimed = [echo for echo in untimed if echo.file.shape[3] == 1]
    # Single volumes are taken in the order in which the user named them, and in no other.
    named = [echo for echo in untimed if echo.is_named]
    if len(named) == len(given):
        timed += [e.with_times((time,)) for e, time in zip(named, given, strict=True)]
        untimed = [echo for echo in untimed if not echo.is_named]
    return timed, untimed


def _plan(
    group: Sequence[EchoFile],
    given: tuple[float, ...] | None,
    given_field_t: float | None,
    *extra: Finding,
) -> StackPlan:
    first = group[0]
    study_path = _study_path(group)
    volumes = [
        (time, VolumePart(file=echo.file, volume=index, sidecars=echo.sidecars))
        for echo in group
        for index, time in enumerate(echo.times_ms)
        if index < echo.file.shape[3]
    ]
    volumes.sort(key=lambda entry: entry[0])
    times = tuple(time for time, _ in volumes)
    acquisition, field_findings = _settle_acquisition(first, given_field_t)
    findings = [*extra, *_check(group, given, times), *field_findings]
    x, y, z, _ = first.file.shape
    if not any(f.code == "nifti-echo-times-missing" for f in findings):
        findings += check_size((x, y, z), len(times), where=first.file.name)
    return StackPlan(
        layout=_layout(group),
        echo_times_ms=times,
        grid=Grid(
            shape=(x, y, z),
            affine_mm=first.file.affine_mm,
            slice_thickness_mm=number(first.sidecar, "SliceThickness"),
        ),
        shape=(x, y, z),
        present=np.ones((len(times), z), dtype=bool),
        acquisition=acquisition,
        subject=subject_of(first.sidecar, first.file.path, study_path),
        findings=tuple(dict.fromkeys(findings)),
        sources=tuple(
            SourceImage(path=part.file.path, frame=part.volume, echo=echo, slice_index=None)
            for echo, (_, part) in enumerate(volumes)
        ),
        refusal=next((f for f in findings if f.level == "stop"), None),
        origin="nifti",
        parts=tuple(part for _, part in volumes),
    )


def _check(
    group: Sequence[EchoFile], given: tuple[float, ...] | None, times: Sequence[float]
) -> Iterator[Finding]:
    first = group[0]
    where = f"file {first.file.name}"
    for echo in group:
        if is_spin_echo(echo.sidecar) or is_echo_planar(echo.sidecar):
            code = "spin-echo" if is_spin_echo(echo.sidecar) else "echo-planar"
            stated = text(echo.sidecar, "ScanningSequence", "PulseSequenceType")
            yield Finding.of(code, series=where, file=echo.file.name, sequence=stated)
            return
    yield from _check_kind(group, where)
    yield from _check_times(group, given, times, where)
    yield from _check_places(group, where)
    agent = acquisition_of(first.sidecar).contrast_agent
    if agent.upper() not in ("", "NONE", "NO"):
        yield Finding.of("contrast-agent", series=where)


def _check_kind(group: Sequence[EchoFile], where: str) -> Iterator[Finding]:
    kinds = sorted({kind_of(echo) for echo in group} - {"magnitude", "unknown"})
    is_told = any(echo.sidecar or echo.parts.entities.get("part") for echo in group)
    if kinds and is_told:
        yield Finding.of("no-magnitude", series=where, kinds=", ".join(kinds))


def _check_times(
    group: Sequence[EchoFile],
    given: tuple[float, ...] | None,
    times: Sequence[float],
    where: str,
) -> Iterator[Finding]:
    by_user = any(echo.time_source == "user" for echo in group)
    tag = "--echo-times-ms" if by_user else "EchoTime of the JSON sidecar"
    for echo in group:
        n_given, n_there = len(echo.times_ms), echo.file.shape[3]
        if echo.times_ms and n_given != n_there:
            yield Finding.of("echo-times-count", where=where, n_given=n_given, n_there=n_there)
            return
    if not times:
        return
    repeated = [time for time, n in Counter(times).items() if n > 1]
    if repeated:
        yield Finding.of(
            "nifti-echo-repeated",
            where=where,
            n_files=Counter(times)[repeated[0]],
            time=f"{repeated[0]:g}",
            file=group[0].file.name,
        )
    if by_user:
        order = "the fourth axis" if len(group) == 1 else "the order in which they were named"
        yield Finding.of("echo-times-given", where=where, given=in_words(times, 24), order=order)
    elif given is not None and not _are_alike(given, times):
        yield Finding.of(
            "echo-times-conflict", where=where, stated=in_words(times), given=in_words(given)
        )
    yield from check_echo_times(sorted(set(times)), where=where, tag=tag)


def _are_alike(a: Sequence[float], b: Sequence[float]) -> bool:
    return len(a) == len(b) and bool(np.abs(np.subtract(a, b)).max() <= _SAME_TIME_MS)


def _check_places(group: Sequence[EchoFile], where: str) -> Iterator[Finding]:
    first = group[0].file
    for echo in group[1:]:
        if echo.file.shape != first.shape or (
            np.abs(echo.file.affine_mm - first.affine_mm).max() > _SAME_PLACE_MM
        ):
            yield Finding.of("nifti-echoes-differ", where=where, file=echo.file.name)
            return
    if not first.is_placed:
        yield Finding.of("position-not-stated", where=where)
    if first.disagreement_mm:
        yield Finding.of("sform-qform-differ", where=where, shift=f"{first.disagreement_mm:.1f}")


def _settle_acquisition(
    echo: EchoFile, given_field_t: float | None
) -> tuple[Acquisition, list[Finding]]:
    acquisition = acquisition_of(echo.sidecar)
    where = f"file {echo.file.name}"
    stated = number(echo.sidecar, "MagneticFieldStrength")
    field_t, found = settle_field_strength(stated, acquisition.imaging_frequency_mhz)
    findings = list(found)
    if given_field_t is not None and field_t is None and stated is None:
        field_t = given_field_t
        findings.append(Finding.of("field-given", where=where, given=f"{given_field_t:g}"))
    elif given_field_t is not None and (field_t is None or abs(field_t - given_field_t) > 0.02):
        shown = f"{field_t if field_t is not None else stated:.4g}"
        findings.append(
            Finding.of(
                "field-given-conflict", where=where, given=f"{given_field_t:g}", stated=shown
            )
        )
    elif field_t is None and stated is None:
        findings.append(
            Finding.of("field-missing", where=where, tag="MagneticFieldStrength of the sidecar")
        )
    return replace(acquisition, field_strength_t=field_t), findings


def _study_path(group: Sequence[EchoFile]) -> Path:
    """What stands for the study: the file, or the first echo's file."""
    return min(echo.file.path for echo in group)


def _layout(group: Sequence[EchoFile]) -> str:
    by_user = any(echo.time_source == "user" for echo in group)
    how = "echo times stated by the user" if by_user else "echo times from JSON sidecars"
    if group[0].parts.is_bids and len(group) > 1:
        return f"BIDS {group[0].parts.suffix}, one file an echo; {how}"
    if len(group) > 1:
        return f"NIfTI, one file an echo; {how}"
    return f"NIfTI, all echoes in one file; {how}"


def _refused(found: FoundFile, finding: Finding) -> StackPlan:
    return StackPlan(
        layout=f"NIfTI file {shown_name(found.path)}",
        echo_times_ms=(),
        grid=None,
        shape=None,
        present=np.zeros((0, 0), dtype=bool),
        acquisition=Acquisition(),
        subject=Subject(study_uid=str(found.path.resolve())),
        findings=(finding,),
        refusal=finding,
        origin="nifti",
    )
