"""Every study under a folder, found by workers; no folder's fault hides another folder's study."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path

from liverfe.batch.crew import Crew, Ending
from liverfe.batch.listener import BatchListener
from liverfe.batch.tasks import BatchOptions, SurveyTask
from liverfe.journey import StudyFound, key_of, peek_secret
from liverfe.wording.command_line import OUTCOME_REASON

_RESULT_MARKS = ("manifest.json", "result.json")
"""A folder that holds both is a result of ours, not a study."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Discovery:
    """What lies under the root of a batch.

    Attributes
    ----------
    studies : tuple of StudyFound
        Each once, sorted by key, then by place.
    lost : tuple of (Path, Ending)
        Folders whose search failed: each keeps a row.
    n_links : int
        Symbolic links that were not followed.
    """

    studies: tuple[StudyFound, ...]
    lost: tuple[tuple[Path, Ending], ...]
    n_links: int


def discover(
    root: Path, options: BatchOptions, *, crew: Crew, listener: BatchListener
) -> Discovery:
    """Find all studies under a folder.

    Parameters
    ----------
    root : Path
        The folder.
    options : BatchOptions
        For the workers.
    crew : Crew
        Who searches.
    listener : BatchListener
        Hears how far it is.

    Returns
    -------
    Discovery
        One study may lie in several folders; it is found once.
    """
    entries = _entries(root, options.out)
    folders = [path for path in entries if path.is_dir() and not path.is_symlink()]
    files = [path for path in entries if path.is_file() and not path.is_symlink()]
    groups: list[tuple[Path, ...]] = [(folder,) for folder in folders]
    groups.extend(_loose_groups(files, each_alone=options.echo_times_ms is not None))
    found, lost = _search(groups, options, crew, listener)
    by_uid: dict[str, list[StudyFound]] = {}
    for study in found:
        by_uid.setdefault(study.study_uid, []).append(study)
    whole = [parts[0] for parts in by_uid.values() if len(parts) == 1]
    joined, lost_again = _join([p for p in by_uid.values() if len(p) > 1], options, crew, listener)
    return Discovery(
        studies=tuple(sorted([*whole, *joined], key=lambda s: (s.key, s.inputs))),
        lost=(*lost, *lost_again),
        n_links=len([path for path in entries if path.is_symlink()]),
    )


def reason_of(ending: Ending, options: BatchOptions) -> str:
    """Say in words why a task failed."""
    return OUTCOME_REASON[ending.kind].format(minutes=options.timeout_min, **ending.facts)


def place_key(path: Path) -> str:
    """Give the key of a place that no study could be read from."""
    secret = peek_secret()
    return key_of(str(path.resolve()), secret) if secret else ""


def _entries(root: Path, out: Path) -> list[Path]:
    """List what lies in the root, our own results and regions left aside."""
    ours = {out.resolve(), (out / "regions").resolve()}
    return [
        path
        for path in sorted(root.iterdir())
        if not path.name.startswith(".")
        and path.resolve() not in ours
        and not all((path / mark).is_file() for mark in _RESULT_MARKS)
    ]


def _loose_groups(files: list[Path], *, each_alone: bool) -> Iterator[tuple[Path, ...]]:
    # Single volumes take the user's echo times in the order in which the user named them, and here
    # nobody named any: so each NIfTI file stands alone where echo times are given.
    alone = [p for p in files if each_alone and p.name.lower().endswith((".nii", ".nii.gz"))]
    together = tuple(path for path in files if path not in alone)
    if together:
        yield together
    for path in alone:
        yield (path,)


def _search(
    groups: list[tuple[Path, ...]], options: BatchOptions, crew: Crew, listener: BatchListener
) -> tuple[list[StudyFound], list[tuple[Path, Ending]]]:
    tasks = [SurveyTask(inputs=group, options=options) for group in groups]
    found: list[StudyFound] = []
    lost: list[tuple[Path, Ending]] = []
    for n_done, ending in enumerate(crew.run(tasks), start=1):
        if ending.kind == "done":
            found.extend(ending.value)
        else:
            lost.append((groups[ending.index][0], ending))
        listener.step("survey", n_done, len(tasks))
    return found, lost


def _join(
    scattered: list[list[StudyFound]],
    options: BatchOptions,
    crew: Crew,
    listener: BatchListener,
) -> tuple[list[StudyFound], list[tuple[Path, Ending]]]:
    """Search again the studies of which several folders hold a part."""
    if not scattered:
        return [], []
    # Sorted: which worker was faster must not show in a result.
    groups = [tuple(sorted({p for part in parts for p in part.inputs})) for parts in scattered]
    found, lost = _search(groups, options, crew, listener)
    inputs_of = {parts[0].study_uid: group for parts, group in zip(scattered, groups, strict=True)}
    joined = [
        replace(study, inputs=inputs_of[study.study_uid])
        for study in found
        if study.study_uid in inputs_of
    ]
    return joined, lost
