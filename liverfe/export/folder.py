"""The result folder of a study: there whole, or not there.

Files are written into a temporary folder beside the target, each synced, the manifest last; then
one rename. An older result moves to ``<study key>.v1``, ``.v2``, ... and is never overwritten. The
same result written again changes nothing.
"""

from __future__ import annotations

import errno
import gzip
import hashlib
import os
import re
import secrets
import shutil
from collections.abc import Iterable
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from liverfe.errors import UsageError
from liverfe.export.disk import plain_disk_errors, sync_folder, write_synced
from liverfe.export.lock import LockedFolder, lock_folder
from liverfe.export.manifest import (
    MANIFEST_NAME,
    Provenance,
    has_provenance,
    manifest_bytes,
    read_manifest,
)
from liverfe.export.output_file import OutputFile
from liverfe.export.verify import verify_one

__all__ = ["WrittenResult", "is_already_made", "remove_leftovers", "write_result"]


@dataclass(frozen=True, slots=True, kw_only=True)
class WrittenResult:
    """What became of a result that was to be written.

    Attributes
    ----------
    path : Path
        The result folder.
    state : {'written', 'unchanged'}
        Unchanged: the same result stood there already, whole.
    older : Path or None
        Where an older result was moved to.
    """

    path: Path
    state: Literal["written", "unchanged"]
    older: Path | None = None


def write_result(
    folder: LockedFolder, files: Iterable[OutputFile], provenance: Provenance
) -> WrittenResult:
    """Write a result folder, whole or not at all.

    Parameters
    ----------
    folder : LockedFolder
        Where to, from `lock_folder`.
    files : iterable of OutputFile
        All files except the manifest, which is made here.
    provenance : Provenance
        What the result was made of.

    Returns
    -------
    WrittenResult
        Whether it was written or stood there already, and where an older one went.

    Raises
    ------
    UsageError
        If the disk refuses: nothing of the new result stays, an older one stays as it was.
    ValueError
        If two files have one path, or one is called ``manifest.json``.
    """
    outputs = tuple(files)
    paths = [file.path for file in outputs]
    if len(set(paths)) != len(paths) or MANIFEST_NAME in paths:
        raise ValueError("each file of a result needs a path of its own; the manifest is made here")
    target = folder.path
    with plain_disk_errors(target.name):
        if target.exists() and not target.is_dir():
            raise NotADirectoryError(errno.ENOTDIR, os.strerror(errno.ENOTDIR))
        if _is_same_result(target, outputs, provenance):
            return WrittenResult(path=target, state="unchanged")
        _remove_leftovers(target)
        temporary = target.parent / f".{target.name}.{secrets.token_hex(8)}.part"
        try:
            _write_folder(temporary, outputs, manifest_bytes(outputs, provenance))
            older = _put_in_place(temporary, target)
        except BaseException:
            shutil.rmtree(temporary, ignore_errors=True)
            raise
    return WrittenResult(path=target, state="written", older=older)


def is_already_made(folder: Path, provenance: Provenance) -> bool:
    """Tell whether a folder holds the whole result of just these inputs, method and versions.

    Parameters
    ----------
    folder : Path
        ``DIR/<study key>``.
    provenance : Provenance
        What the result would be made of.

    Returns
    -------
    bool
        True if making it again could only give the same: a batch that resumes skips it.
    """
    if verify_one(folder):
        return False
    return has_provenance(read_manifest((folder / MANIFEST_NAME).read_bytes()), provenance)


def remove_leftovers(out: Path) -> None:
    """Remove what killed runs left half-written in an output folder.

    Parameters
    ----------
    out : Path
        The folder of result folders. What a living run is writing there stays.
    """
    # A lock of a run that was killed holds nobody up, and goes with the rest.
    pattern = re.compile(r"\.(.+?)\.(?:[0-9a-f]{16}\.part|lock)")
    names = {match[1] for path in out.iterdir() if (match := pattern.fullmatch(path.name))}
    for name in sorted(names):
        with suppress(UsageError), lock_folder(out / name) as folder:
            _remove_leftovers(folder.path)


def _is_same_result(target: Path, outputs: tuple[OutputFile, ...], provenance: Provenance) -> bool:
    if not target.is_dir() or not is_already_made(target, provenance):
        return False
    stated = {
        output["path"]: output["sha256"]
        for output in read_manifest((target / MANIFEST_NAME).read_bytes())["outputs"]
    }
    if stated.keys() != {file.path for file in outputs}:
        return False
    return all(_is_same_file(target / f.path, stated[f.path], f) for f in outputs)


def _is_same_file(path: Path, stated_sha256: str, file: OutputFile) -> bool:
    if hashlib.sha256(file.content).hexdigest() == stated_sha256:
        return True
    # Another processor may compress the same image to other bytes.
    return path.suffix == ".gz" and gzip.decompress(path.read_bytes()) == gzip.decompress(
        file.content
    )


def _remove_leftovers(target: Path) -> None:
    """Remove what a killed run left; the lock says that no living run is writing there."""
    pattern = re.compile(rf"\.{re.escape(target.name)}\.[0-9a-f]{{16}}\.part")
    for path in target.parent.iterdir():
        if pattern.fullmatch(path.name):
            shutil.rmtree(path, ignore_errors=True)


def _write_folder(temporary: Path, outputs: tuple[OutputFile, ...], manifest: bytes) -> None:
    folders = {(temporary / file.path).parent for file in outputs} | {temporary}
    for folder in sorted(folders):
        folder.mkdir(parents=True, exist_ok=True)
    write_synced([(temporary / file.path, file.content) for file in outputs])
    write_synced([(temporary / MANIFEST_NAME, manifest)])
    for folder in folders:
        sync_folder(folder)


def _put_in_place(temporary: Path, target: Path) -> Path | None:
    older = _older_name(target) if target.exists() else None
    if older:
        os.rename(target, older)
    try:
        os.rename(temporary, target)
        sync_folder(target.parent)
    except BaseException:
        with suppress(OSError):
            if target.exists():
                os.rename(target, temporary)
        if older:
            with suppress(OSError):
                os.rename(older, target)
        raise
    return older


def _older_name(target: Path) -> Path:
    pattern = re.compile(rf"{re.escape(target.name)}\.v([0-9]+)")
    taken = [int(m[1]) for path in target.parent.iterdir() if (m := pattern.fullmatch(path.name))]
    return target.parent / f"{target.name}.v{max(taken, default=0) + 1}"
