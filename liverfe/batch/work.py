"""`run_batch`: every study under a folder measured, by workers, and none lost."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from liverfe.batch.crew import Crew
from liverfe.batch.discovery import Discovery, discover, place_key, reason_of
from liverfe.batch.listener import BatchListener, Silence
from liverfe.batch.plan import check_root, stack_keys
from liverfe.batch.summary import (
    FAILED,
    WAITING,
    Row,
    plain_row,
    standing,
    told_counts,
    told_row,
    worst_first,
    write_summary,
)
from liverfe.batch.tasks import BatchOptions, StudyTask, make_crew, make_options
from liverfe.errors import UsageError
from liverfe.export import check_writable, lock_folder, remove_leftovers
from liverfe.journey import (
    Settings,
    Stopwatch,
    expected_bytes,
    free_bytes,
    load_secret,
    told_size,
)
from liverfe.wording.command_line import BATCH_NO_ROOM, BATCH_NOTHING, BATCH_WAITING

_SUMMARY_EVERY_S = 2.0
"""Seconds between two interim summaries: often enough to look at, rarely enough to cost nothing."""


def run_batch(
    root: Path,
    out: Path,
    *,
    settings: Settings,
    echo_times_ms: tuple[float, ...] | None = None,
    field_strength_t: float | None = None,
    listener: BatchListener | None = None,
) -> dict[str, Any]:
    """Measure every study under a folder. Running it again goes on where it stopped.

    Parameters
    ----------
    root : Path
        The folder of studies; only read.
    out : Path
        Results go to ``<out>/<study key>``, the summary to ``<out>/summary.csv``.
    settings : Settings
        As resolved.
    echo_times_ms : tuple of float, optional
        For files that state none, ms.
    field_strength_t : float, optional
        For files that state none, T.
    listener : BatchListener, optional
        Hears how far it is.

    Returns
    -------
    dict
        Plain JSON values: all rows, the worst first, counts, where the summary lies, and the exit
        status: 4 where some were refused or failed.

    Raises
    ------
    UsageError
        If the root is no folder or holds no study, a setting is wrong, the output cannot be
        written or has no room, or another batch is at work there.
    """
    check_root(root)
    options = make_options(
        out,
        settings=settings,
        echo_times_ms=echo_times_ms,
        field_strength_t=field_strength_t,
    )
    check_writable(out)
    load_secret()
    heard = listener or Silence()
    with lock_folder(out / "batch"):
        try:
            with make_crew(options) as crew:
                discovery = discover(root, options, crew=crew, listener=heard)
                rows, n_done_before = _measure_all(discovery, options, crew, heard)
        finally:
            # Workers are gone by now; what one of them left half-written goes too.
            remove_leftovers(out)
        place = write_summary(out, rows.values())
    return _document(rows, place, n_done_before)


def _measure_all(
    discovery: Discovery, options: BatchOptions, crew: Crew, listener: BatchListener
) -> tuple[dict[str, Row], int]:
    """Measure all studies; the rows stand in the summary from the start, waiting.

    Gives the rows by key, and how many were done before.
    """
    tasks = _tasks(discovery, options)
    rows = {t.key: plain_row(t.key, t.patient_key, WAITING, BATCH_WAITING) for t in tasks}
    for place, ending in discovery.lost:
        key = place_key(place)
        rows[key] = plain_row(key, "", FAILED, reason_of(ending, options))
    if not rows:
        raise UsageError(BATCH_NOTHING)
    _refuse_without_room(discovery, options)
    write_summary(options.out, rows.values())
    written = Stopwatch()
    done_before: list[str] = []
    listener.step("batch", 0, len(tasks))
    for n_done, ending in enumerate(crew.run(tasks), start=1):
        task = tasks[ending.index]
        if ending.kind == "done":
            row = ending.value["row"]
            if ending.value["was_done"]:
                done_before.append(task.key)
        else:
            row = plain_row(task.key, task.patient_key, FAILED, reason_of(ending, options))
        rows[task.key] = row
        listener.row(told_row(row), is_clean=row["outcome"] == "reported")
        listener.step("batch", n_done, len(tasks))
        if written.left_of(_SUMMARY_EVERY_S) <= 0:
            write_summary(options.out, rows.values())
            written = Stopwatch()
    return rows, len(done_before)


def _tasks(discovery: Discovery, options: BatchOptions) -> list[StudyTask]:
    """One task for each usable stack, one for each study without any."""
    tasks = []
    for study in discovery.studies:
        keys = stack_keys(study)
        for number, key in enumerate(keys, start=1):
            tasks.append(
                StudyTask(
                    key=key,
                    patient_key=study.patient_key,
                    inputs=study.inputs,
                    stack_number=number if len(keys) > 1 else None,
                    options=options,
                )
            )
    return tasks


def _refuse_without_room(discovery: Discovery, options: BatchOptions) -> None:
    """Do not start what will stop at study 180 of 200 for want of room."""
    new = [
        stack
        for study in discovery.studies
        for key, stack in zip(stack_keys(study), study.usable, strict=False)
        if not (options.out / key).exists()
    ]
    needed, free = expected_bytes(new), free_bytes(options.out)
    if needed > free:
        raise UsageError(
            BATCH_NO_ROOM.format(
                path=options.out.name, needed=told_size(needed), free=told_size(free)
            )
        )


def _document(rows: dict[str, Row], summary: Path, n_done_before: int) -> dict[str, Any]:
    listed = worst_first(rows.values())
    bad = [row for row in listed if row["outcome"] != "reported"]
    return {
        "schema": 1,
        "rows": sorted(listed, key=lambda row: row["key"]),
        "to_look_at": [told_row(row) for row in listed if standing(row) != "reported"],
        "n_done_before": n_done_before,
        "summary_csv": str(summary),
        "summary": told_counts(listed, n_done_before),
        "exit_status": 4 if bad else 0,
    }
