"""What a worker is asked to do, and the doing: plain functions that a fresh process can import."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from liverfe.batch.crew import Crew
from liverfe.calibration import CalibrationCurve
from liverfe.export import summary_row
from liverfe.journey import Identity, Settings, StudyFound, choose_method, find_studies, run_study
from liverfe.study import Method


@dataclass(frozen=True, slots=True, kw_only=True)
class BatchOptions:
    """What holds for every study of a batch.

    Attributes
    ----------
    out : Path
        The output folder.
    method : Method
        Every choice that can move a number.
    site_curves : tuple of CalibrationCurve
        A site's own curves.
    identity : {'full', 'key'}
        What reports may carry.
    echo_times_ms : tuple of float or None
        For files that state none, ms.
    field_strength_t : float or None
        For files that state none, T.
    n_workers : int
        Processes.
    timeout_min, timeout_s : float
        What one study may take, in minutes and in seconds.
    """

    out: Path
    method: Method
    site_curves: tuple[CalibrationCurve, ...]
    identity: Identity
    echo_times_ms: tuple[float, ...] | None
    field_strength_t: float | None
    n_workers: int
    timeout_min: float
    timeout_s: float


@dataclass(frozen=True, slots=True, kw_only=True)
class SurveyTask:
    """A folder, or files that lie together, to be searched for studies."""

    inputs: tuple[Path, ...]
    options: BatchOptions


@dataclass(frozen=True, slots=True, kw_only=True)
class StudyTask:
    """One stack to measure, or one study to refuse.

    Attributes
    ----------
    key, patient_key : str
        Its keys, for its row should it fail.
    inputs : tuple of Path
        The study.
    stack_number : int or None
        Which of several usable stacks.
    options : BatchOptions
        As for all.
    """

    key: str
    patient_key: str
    inputs: tuple[Path, ...]
    stack_number: int | None
    options: BatchOptions


def make_options(
    out: Path,
    *,
    settings: Settings,
    echo_times_ms: tuple[float, ...] | None,
    field_strength_t: float | None,
) -> BatchOptions:
    """Turn settings into what every worker is handed.

    Parameters
    ----------
    out : Path
        The output folder.
    settings : Settings
        As resolved.
    echo_times_ms : tuple of float or None
        For files that state none, ms.
    field_strength_t : float or None
        For files that state none, T.

    Returns
    -------
    BatchOptions
        With the method chosen and curve files read.

    Raises
    ------
    UsageError
        As `liverfe.journey.choose_method`.
    """
    method, site_curves = choose_method(settings)
    return BatchOptions(
        out=out,
        method=method,
        site_curves=site_curves,
        identity=settings.identity,
        echo_times_ms=echo_times_ms,
        field_strength_t=field_strength_t,
        n_workers=settings.workers or default_workers(),
        timeout_min=settings.timeout_min,
        timeout_s=settings.timeout_s,
    )


def default_workers() -> int:
    """Give the number of processors that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def perform(task: SurveyTask | StudyTask) -> Any:
    """Do what a worker is asked for."""
    return search(task) if isinstance(task, SurveyTask) else measure(task)


def make_crew(options: BatchOptions) -> Crew:
    """Make the crew of a batch."""
    return Crew(perform, n_workers=options.n_workers, timeout_s=options.timeout_s)


def search(task: SurveyTask) -> tuple[StudyFound, ...]:
    """Find the studies of one folder, in a worker."""
    options = task.options
    return find_studies(
        task.inputs,
        method=options.method,
        site_curves=options.site_curves,
        echo_times_ms=options.echo_times_ms,
        field_strength_t=options.field_strength_t,
    )


def measure(task: StudyTask) -> dict[str, Any]:
    """Measure one study, in a worker; give its row, and whether it was done before."""
    options = task.options
    outcome = run_study(
        task.inputs,
        out=options.out,
        method=options.method,
        site_curves=options.site_curves,
        stack_number=task.stack_number,
        echo_times_ms=options.echo_times_ms,
        field_strength_t=options.field_strength_t,
        identity=options.identity,
        resume=True,
    )
    return {"row": summary_row(outcome.document), "was_done": outcome.was_done}
