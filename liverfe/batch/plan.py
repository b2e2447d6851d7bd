"""The dry run: what a batch would do, study by study; it writes nothing."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from liverfe.batch.discovery import Discovery, discover, place_key, reason_of
from liverfe.batch.listener import BatchListener, Silence
from liverfe.batch.tasks import BatchOptions, make_crew, make_options
from liverfe.errors import UsageError
from liverfe.journey import (
    Settings,
    StudyFound,
    expected_bytes,
    expected_seconds,
    find_region_files,
    free_bytes,
    told_duration,
    told_size,
)
from liverfe.wording.command_line import (
    BATCH_NOTHING,
    PLAN_ESTIMATE,
    PLAN_IS_REFUSED,
    PLAN_IS_USABLE,
    PLAN_LAST,
    PLAN_NEW_KEY,
    ROOT_IS_NO_FOLDER,
)


def plan_batch(
    root: Path,
    out: Path,
    *,
    settings: Settings,
    echo_times_ms: tuple[float, ...] | None = None,
    field_strength_t: float | None = None,
    listener: BatchListener | None = None,
) -> dict[str, Any]:
    """Tell what `run_batch` would do.

    Parameters
    ----------
    root : Path
        The folder of studies.
    out : Path
        Where results would go; need not exist.
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
        Plain JSON values: a row for each stack and each refused study, estimates, settings with
        their origins, and the exit status.

    Raises
    ------
    UsageError
        If the root is no folder, holds no study, or a setting is wrong.
    """
    check_root(root)
    options = make_options(
        out,
        settings=settings,
        echo_times_ms=echo_times_ms,
        field_strength_t=field_strength_t,
    )
    with make_crew(options) as crew:
        discovery = discover(root, options, crew=crew, listener=listener or Silence())
    rows = [row for study in discovery.studies for row in _rows(study, options)]
    rows += [_lost_row(place, reason_of(end, options)) for place, end in discovery.lost]
    if not rows:
        raise UsageError(BATCH_NOTHING)
    stacks = [stack for study in discovery.studies for stack in study.usable]
    needed, free = expected_bytes(stacks), free_bytes(out)
    seconds = expected_seconds(discovery.studies, options.n_workers)
    refused = [row for row in rows if row["outcome"] != PLAN_IS_USABLE]
    drawn = [row for row in rows if row["n_region_files"] and row not in refused]
    return {
        "schema": 1,
        "studies": rows,
        "n_links_not_followed": discovery.n_links,
        "expected_seconds": seconds,
        "expected_bytes": needed,
        "free_bytes": free,
        "settings": settings.explained(),
        "estimate": PLAN_ESTIMATE.format(
            duration=told_duration(seconds),
            workers=options.n_workers,
            disk=told_size(needed),
            free=told_size(free),
        ),
        "summary": PLAN_LAST.format(usable=len(stacks), total=len(rows), n_regions=len(drawn)),
        "exit_status": 0,
    }


def check_root(root: Path) -> None:
    """Refuse a root that is no folder.

    Parameters
    ----------
    root : Path
        The folder of studies.

    Raises
    ------
    UsageError
        If it is none.
    """
    if not root.is_dir():
        raise UsageError(ROOT_IS_NO_FOLDER.format(name=root.name))


def stack_keys(study: StudyFound) -> list[str]:
    """Give the keys of a study's usable stacks: its own, then with ``-2``, ``-3``, ...

    Parameters
    ----------
    study : StudyFound
        The study.

    Returns
    -------
    list of str
        One each, empty before the first run; a single one for a study that is refused.
    """
    further = [number for number, _ in enumerate(study.usable, start=1) if number > 1]
    return [study.key, *(f"{study.key}-{n}" if study.key else "" for n in further)]


def _rows(study: StudyFound, options: BatchOptions) -> list[dict[str, Any]]:
    rejected = [{"layout": stack["layout"], "reason": _stops(stack)} for stack in study.refused]
    rejected += [
        {"layout": left["what"], "reason": left["why"]}
        for stack in (*study.usable, *study.refused)
        for left in stack["left_out"]
    ]
    rejected = [entry for n, entry in enumerate(rejected) if entry not in rejected[:n]]
    shown = study.usable or study.refused[:1] or ({},)
    files = len(find_region_files(study.inputs, out=options.out, key=study.key))
    rows = []
    for key, stack in zip(stack_keys(study), shown, strict=True):
        rows.append(
            {
                "key": key or None,
                "name": key or PLAN_NEW_KEY,
                "outcome": PLAN_IS_USABLE if study.usable else PLAN_IS_REFUSED,
                "reason": study.reason,
                "layout": stack.get("layout", ""),
                "n_images": stack.get("n_images", 0),
                "n_images_expected": stack.get("n_images_expected", 0),
                "n_slices": stack.get("n_slices", 0),
                "echo_times_ms": stack.get("echo_times_ms", []),
                "field_strength_t": stack.get("field_strength_t"),
                "curve": stack["curve"]["key"] if stack.get("curve") else None,
                "n_region_files": files,
                "rejected": rejected,
            }
        )
    return rows


def _stops(stack: dict[str, Any]) -> str:
    return " ".join(f["text"] for f in stack["findings"] if f["level"] == "stop")


def _lost_row(place: Path, reason: str) -> dict[str, Any]:
    key = place_key(place)
    return {
        "key": key or None,
        "name": key or PLAN_NEW_KEY,
        "outcome": PLAN_IS_REFUSED,
        "reason": reason,
        "layout": "",
        "n_images": 0,
        "n_images_expected": 0,
        "n_slices": 0,
        "echo_times_ms": [],
        "field_strength_t": None,
        "curve": None,
        "n_region_files": 0,
        "rejected": [],
    }


__all__ = ["Discovery", "check_root", "plan_batch", "stack_keys"]
