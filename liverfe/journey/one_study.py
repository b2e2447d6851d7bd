"""`run_study`: one study, files in -> result folder out.

The only place where acquire, study, report and export meet.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, field, replace
from pathlib import Path
from typing import Any

from liverfe.acquire import (
    InputFile,
    StackPlan,
    Survey,
    check_frame_of_reference,
    find_stacks,
    load_stack,
)
from liverfe.calibration import CalibrationCurve
from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused, UsageError
from liverfe.export import InputFile as ManifestInput
from liverfe.export import (
    LockedFolder,
    Provenance,
    check_writable,
    is_already_made,
    lock_folder,
    provenance_of,
)
from liverfe.journey.drawn import DrawnRegions, find_region_files, hash_file, read_drawn_regions
from liverfe.journey.keys import load_secret
from liverfe.journey.progress import Progress, no_progress
from liverfe.journey.result_folder import write_result_folder
from liverfe.journey.settings import Identity
from liverfe.journey.software import software_versions
from liverfe.journey.stack_choice import HOLES, StackChoice, choose_stack, plan_files
from liverfe.journey.warming import start_warming
from liverfe.study import Method, StudyResult, assess_study, refused_result
from liverfe.wording.command_line import INPUT_MISSING, REGIONS_MISSING


@dataclass(frozen=True, slots=True, kw_only=True)
class JourneyOutcome:
    """What a study came to, and where it lies.

    Attributes
    ----------
    folder : Path
        The result folder.
    document : dict
        What ``result.json`` holds.
    was_done : bool
        True where the same result stood there already and nothing was measured again.
    """

    folder: Path
    document: dict[str, Any]
    was_done: bool = False

    @property
    def refused(self) -> bool:
        """Whether no number is given."""
        return bool(self.document["outcome"] == "refused")

    @property
    def report(self) -> Path:
        """Where the PDF lies."""
        return self.folder / "report.pdf"


@dataclass(frozen=True, slots=True, kw_only=True)
class _Call:
    """What one run was asked for, beyond its input."""

    out: Path
    regions: Path | None
    method: Method
    site_curves: tuple[CalibrationCurve, ...]
    identity: Identity
    settings: Mapping[str, str]
    resume: bool
    progress: Progress


def run_study(
    inputs: Sequence[Path],
    *,
    out: Path,
    regions: Path | None = None,
    method: Method | None = None,
    site_curves: Sequence[CalibrationCurve] = (),
    stack_number: int | None = None,
    echo_times_ms: Sequence[float] | None = None,
    field_strength_t: float | None = None,
    identity: Identity = "full",
    resume: bool = False,
    progress: Progress = no_progress,
) -> JourneyOutcome:
    """Measure one study and write its result folder.

    Parameters
    ----------
    inputs : sequence of Path
        Files and folders of one study; they are only read.
    out : Path
        The result goes to ``<out>/<study key>``.
    regions : Path, optional
        Region file; else those found in `inputs`, else those kept in ``<out>/regions/<study key>``.
    method : Method, optional
        The house's by default.
    site_curves : sequence of CalibrationCurve
        A site's own curves; used only where the method names one.
    stack_number : int, optional
        Which of several usable stacks, from 1.
    echo_times_ms : sequence of float, optional
        For files that state none, in ms.
    field_strength_t : float, optional
        For files that state none, in T.
    identity : {'full', 'key'}
        What the report may carry.
    resume : bool
        Whether a whole result of the same input, method, settings and versions is taken as done.
    progress : Progress
        Listener.

    Returns
    -------
    JourneyOutcome
        Also of a study that is refused: its folder says why, and holds no number.

    Raises
    ------
    UsageError
        If the call itself is wrong, or the output cannot be written.
    """
    _check_paths(inputs, regions)
    check_writable(out)
    start_warming()
    secret = load_secret()
    survey = find_stacks(
        inputs,
        echo_times_ms=echo_times_ms,
        field_strength_t=field_strength_t,
        progress=lambda done, total: progress("survey", done, total),
    )
    choice = choose_stack(survey, number=stack_number, inputs=inputs, secret=secret)
    call = _Call(
        out=out,
        regions=regions,
        method=method or Method(),
        site_curves=tuple(site_curves),
        identity=identity,
        settings=_settings(identity, site_curves, echo_times_ms, field_strength_t),
        resume=resume,
        progress=progress,
    )
    with lock_folder(out / choice.label.key) as folder:
        return _measure_and_write(inputs, survey, choice, call, folder)


def _measure_and_write(
    inputs: Sequence[Path], survey: Survey, choice: StackChoice, call: _Call, folder: LockedFolder
) -> JourneyOutcome:
    files = find_region_files(inputs, out=call.out, key=choice.label.key, named=call.regions)
    plan = choice.plan or (choice.holed if files else None)
    if plan is None:
        measured = _Measured(result=refused_result(choice.findings, call.method))
    elif call.resume and (done := _done_before(plan, files, choice, call, folder)):
        return done
    else:
        measured = _measure(plan, files, call, _worth_telling(survey))
    call.progress("write", 0, 0)
    read = measured.read or _hash_plans((plan,) if plan else choice.plans)
    document = write_result_folder(
        folder,
        measured.result,
        label=choice.label,
        identity=call.identity,
        provenance=_provenance(read, measured.drawn.inputs, choice, call),
    )
    return JourneyOutcome(folder=folder.path, document=document)


@dataclass(frozen=True, slots=True, kw_only=True)
class _Measured:
    """A result, and the files that it came from."""

    result: StudyResult
    read: tuple[InputFile, ...] = ()
    drawn: DrawnRegions = field(default_factory=DrawnRegions)


def _measure(
    plan: StackPlan, region_files: Sequence[Path], call: _Call, told: tuple[Finding, ...]
) -> _Measured:
    """Load, read regions and assess; a refusal at any point is a result too."""
    call.progress("load", 0, 0)
    try:
        loaded = load_stack(plan)
    except StudyRefused as refusal:
        return _Measured(result=refused_result((*refusal.findings, *told), call.method))
    call.progress("measure", 0, 0)
    stack, drawn = loaded.stack, DrawnRegions()
    try:
        drawn = read_drawn_regions(region_files)
        check_frame_of_reference(drawn.regions, stack.grid)
        stack = _without_refusal_for_holes(plan, stack)
        result = assess_study(stack, drawn.regions, call.method, site_curves=call.site_curves)
        result = replace(result, findings=in_order((*result.findings, *drawn.findings, *told)))
    except StudyRefused as refusal:
        result = refused_result((*refusal.findings, *told), call.method, stack=loaded.stack)
    return _Measured(result=result, read=loaded.inputs, drawn=drawn)


def _without_refusal_for_holes(plan: StackPlan, stack: EchoStack) -> EchoStack:
    """Let a stack with holes serve regions on its complete slices; the study refuses others."""
    if plan.refusal is None:
        return stack
    complete = stack.complete_slices
    told = Finding.of(
        "holes-outside-regions",
        n_missing=int((~plan.present).sum()),
        n_complete=int(complete.sum()),
        n_slices=len(complete),
    )
    kept = tuple(finding for finding in stack.findings if finding.code != HOLES)
    return replace(stack, findings=(told, *kept))


def _worth_telling(survey: Survey) -> tuple[Finding, ...]:
    """Doubts about the input as a whole; that it held other studies too is no doubt of this one."""
    return tuple(finding for finding in survey.findings if finding.code != "several-studies")


def in_order(findings: Sequence[Finding]) -> tuple[Finding, ...]:
    """Give each finding once, gravest first, otherwise as they were raised."""
    gravity = ("stop", "caution", "note")
    return tuple(sorted(dict.fromkeys(findings), key=lambda f: gravity.index(f.level)))


def _done_before(
    plan: StackPlan,
    region_files: Sequence[Path],
    choice: StackChoice,
    call: _Call,
    folder: LockedFolder,
) -> JourneyOutcome | None:
    """Find the result that would only be made again."""
    read = _hash_plans((plan,))
    drawn = tuple(hash_file(path) for path in region_files)
    if not is_already_made(folder.path, _provenance(read, drawn, choice, call)):
        return None
    document = json.loads((folder.path / "result.json").read_bytes())
    return JourneyOutcome(folder=folder.path, document=document, was_done=True)


def _hash_plans(plans: Sequence[StackPlan]) -> tuple[InputFile, ...]:
    """Hash the files of plans that were not loaded; one that has gone since is left out."""
    paths = dict.fromkeys(path for plan in plans for path in plan_files(plan))
    return tuple(hash_file(path) for path in paths if path.is_file())


def _provenance(
    read: Sequence[InputFile], drawn: Sequence[InputFile], choice: StackChoice, call: _Call
) -> Provenance:
    inputs = [
        ManifestInput(role=role, sha256=file.sha256, n_bytes=file.n_bytes)
        for role, files in (("image", read), ("regions", drawn))
        for file in files
    ]
    return provenance_of(
        key=choice.label.key,
        method={"id": call.method.id, **asdict(call.method)},
        software=software_versions(),
        inputs=inputs,
        settings=call.settings,
    )


def _settings(
    identity: Identity,
    site_curves: Sequence[CalibrationCurve],
    echo_times_ms: Sequence[float] | None,
    field_strength_t: float | None,
) -> dict[str, str]:
    """Every choice outside the method that changes a file of the result."""
    settings: dict[str, str] = {"identity": identity}
    if site_curves:
        settings["site_curves"] = " ".join(f"{c.key}:{c.fingerprint}" for c in site_curves)
    if echo_times_ms is not None:
        settings["echo_times_ms"] = " ".join(f"{time:g}" for time in echo_times_ms)
    if field_strength_t is not None:
        settings["field_strength_t"] = f"{field_strength_t:g}"
    return settings


def _check_paths(inputs: Sequence[Path], regions: Path | None) -> None:
    for path in inputs:
        if not path.exists():
            raise UsageError(INPUT_MISSING.format(name=path.name))
    if regions is not None and not regions.is_file():
        raise UsageError(REGIONS_MISSING.format(name=regions.name))
