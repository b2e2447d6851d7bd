"""`find_stacks`: what an input holds, from headers alone."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from liverfe.acquire.echo_times import as_given, given_field
from liverfe.acquire.naming import shown_name
from liverfe.acquire.plan import Progress, StackPlan, Survey
from liverfe.acquire.walk import FoundFile, list_files
from liverfe.echoes import LeftOut
from liverfe.errors import Finding

if TYPE_CHECKING:
    from liverfe.acquire.dicom.header import ImageHeader

_VERDICT_ORDER = {"usable": 0, "repeat": 1, "refused": 2}


def find_stacks(
    inputs: Sequence[Path],
    *,
    echo_times_ms: Sequence[float] | None = None,
    field_strength_t: float | None = None,
    progress: Progress | None = None,
) -> Survey:
    """Find the echo stacks of an input from headers alone; nothing is written.

    Parameters
    ----------
    inputs : sequence of Path
        Files and folders; files are told apart by content, folders walked without following links.
    echo_times_ms : sequence of float, optional
        For files that state none: ascending, in ms.
    field_strength_t : float, optional
        For files that state none, in T.
    progress : callable, optional
        Called with the number of files read and of all files.

    Returns
    -------
    Survey
        One plan for each acquisition, usable or refused, and all that belongs to none.

    Raises
    ------
    UsageError
        If an input does not exist, or the echo times or the field make no sense.
    """
    times, field_t = as_given(echo_times_ms), given_field(field_strength_t)
    files, left_out = list_files([Path(given) for given in inputs])
    plans: list[StackPlan] = []
    findings: list[Finding] = []
    dicom = [found for found in files if found.content == "dicom"]
    if dicom:
        # pydicom and nibabel take a third of a second each to import: only what is needed.
        from liverfe.acquire.dicom.plans import plan_dicom  # noqa: PLC0415

        images, unread, damaged = _read_dicom(dicom, progress)
        left_out += unread
        findings += damaged
        found_plans, aside = plan_dicom(images, echo_times_ms=times, field_strength_t=field_t)
        plans += found_plans
        left_out += aside
    nifti = [found for found in files if found.content == "nifti"]
    if nifti:
        from liverfe.acquire.nifti.plans import plan_nifti  # noqa: PLC0415

        nifti_plans, aside = plan_nifti(nifti, echo_times_ms=times, field_strength_t=field_t)
        nifti_plans, converted = _without_conversions(nifti_plans, plans, nifti)
        plans += nifti_plans
        left_out += [*aside, *converted]
    n_other = sum(found.content == "other" for found in files)
    if n_other:
        left_out.append(
            LeftOut(what="other files", n_files=n_other, why="they are no images that we read")
        )
    findings += _several_studies(plans)
    plans.sort(key=lambda plan: _VERDICT_ORDER[plan.verdict])
    return Survey(stacks=tuple(plans), left_out=tuple(left_out), findings=tuple(findings))


def _read_dicom(
    files: Sequence[FoundFile], progress: Progress | None
) -> tuple[list[ImageHeader], list[LeftOut], list[Finding]]:
    """Read all headers; files that are damaged or no images are listed, never dropped."""
    from liverfe.acquire.dicom.left_out import tally  # noqa: PLC0415
    from liverfe.acquire.dicom.reading import (  # noqa: PLC0415
        NoImage,
        NotReadable,
        read_headers,
    )

    images: list[ImageHeader] = []
    reasons: list[tuple[str, str]] = []
    findings: list[Finding] = []
    for n_done, found in enumerate(files, start=1):
        try:
            images += read_headers(found.path, found.n_bytes)
        except NoImage as other:
            reasons.append((f"{other} objects", "they are no MR images"))
        except (NotReadable, OSError) as damage:
            reason = str(damage) if isinstance(damage, NotReadable) else type(damage).__name__
            reasons.append(("damaged files", reason))
            findings.append(Finding.of("damaged-file", file=shown_name(found.path), reason=reason))
        if progress is not None:
            progress(n_done, len(files))
    return images, tally(reasons), findings


def _without_conversions(
    plans: Sequence[StackPlan], dicom: Sequence[StackPlan], files: Sequence[FoundFile]
) -> tuple[list[StackPlan], list[LeftOut]]:
    """Leave out NIfTI stacks that a folder holds beside the DICOM images they were made from."""
    named = {found.path for found in files if found.is_named}
    known = [(p.echo_times_ms, sorted(p.shape)) for p in dicom if p.shape and p.refusal is None]
    kept: list[StackPlan] = []
    n_files = 0
    for plan in plans:
        is_known = plan.shape is not None and any(
            sorted(plan.shape) == shape
            and len(times) == len(plan.echo_times_ms)
            and all(abs(a - b) < 0.01 for a, b in zip(times, plan.echo_times_ms, strict=True))
            for times, shape in known
        )
        if is_known and not named & {source.path for source in plan.sources}:
            n_files += plan.n_files
        else:
            kept.append(plan)
    if not n_files:
        return kept, []
    why = "the DICOM images with the same echo times are there"
    return kept, [LeftOut(what="NIfTI images", n_files=n_files, why=why)]


def _several_studies(plans: Sequence[StackPlan]) -> list[Finding]:
    studies = {plan.subject.study_uid for plan in plans if plan.origin == "dicom"}
    patients = {plan.subject.patient_id for plan in plans if plan.origin == "dicom"}
    if len(studies) < 2:
        return []
    return [Finding.of("several-studies", n_studies=len(studies), n_patients=max(1, len(patients)))]
