"""Writing so that nothing half-written ever bears a final name, and plain words when it fails."""

from __future__ import annotations

import errno
import os
import secrets
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from pathlib import Path

from liverfe.errors import UsageError
from liverfe.wording.export import (
    DISK_FAULT,
    DISK_FULL,
    NOT_A_FOLDER,
    NOT_ALLOWED,
    READ_ONLY,
)

__all__ = ["check_writable", "plain_disk_errors", "sync_folder", "write_synced"]

_WORDS_BY_ERRNO = {
    errno.ENOSPC: DISK_FULL,
    getattr(errno, "EDQUOT", errno.ENOSPC): DISK_FULL,
    errno.EACCES: NOT_ALLOWED,
    errno.EPERM: NOT_ALLOWED,
    errno.EROFS: READ_ONLY,
    errno.ENOTDIR: NOT_A_FOLDER,
    errno.EEXIST: NOT_A_FOLDER,
}

_AT_A_TIME = 32
"""Files open at once; some systems allow no more than 256 in all."""

_PROBE = b"liverfe writes this to see whether it may\n" * 100


def check_writable(folder: Path) -> None:
    """See whether files can be written into a folder, before the work starts.

    Parameters
    ----------
    folder : Path
        Made if it does not exist; a small file is written into it, synced and removed.

    Raises
    ------
    UsageError
        If it cannot be written to, with the cause and what to do.
    """
    with plain_disk_errors(folder.name):
        folder.mkdir(parents=True, exist_ok=True)
        probe = folder / f".{secrets.token_hex(8)}.probe"
        try:
            write_synced([(probe, _PROBE)])
        finally:
            probe.unlink(missing_ok=True)


@contextmanager
def plain_disk_errors(folder_name: str) -> Iterator[None]:
    """Turn what the system says of a failed write into a sentence with cause and remedy.

    Parameters
    ----------
    folder_name : str
        Last part of the output folder's path: the rest may hold anything.

    Raises
    ------
    UsageError
        In place of any `OSError`.
    """
    try:
        yield
    except OSError as error:
        words = _WORDS_BY_ERRNO.get(error.errno or 0, DISK_FAULT)
        cause = os.strerror(error.errno) if error.errno else type(error).__name__
        # `from None`: the system's own message holds the whole path.
        raise UsageError(words.format(name=folder_name, cause=cause)) from None


def write_synced(files: Iterable[tuple[Path, bytes]]) -> None:
    """Write new files and wait until the disk has them.

    Parameters
    ----------
    files : iterable of (Path, bytes)
        Where to and what; a file that exists already is an error.

    Raises
    ------
    OSError
        If a file cannot be written whole.
    """
    waiting = list(files)
    for start in range(0, len(waiting), _AT_A_TIME):
        _write_then_sync(waiting[start : start + _AT_A_TIME])


def _write_then_sync(files: list[tuple[Path, bytes]]) -> None:
    """Write some files, then sync them, so that the disk can order its work."""
    descriptors: list[int] = []
    try:
        for path, content in files:
            flags = os.O_WRONLY | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0)
            descriptors.append(os.open(path, flags, 0o666))
            rest = memoryview(content)
            while rest:
                rest = rest[os.write(descriptors[-1], rest) :]
        for descriptor in descriptors:
            os.fsync(descriptor)
    finally:
        for descriptor in descriptors:
            os.close(descriptor)


def sync_folder(folder: Path) -> None:
    """Wait until the disk has a folder's list of files; Windows does that by itself.

    Parameters
    ----------
    folder : Path
        The folder.

    Raises
    ------
    OSError
        If the disk fails.
    """
    if os.name == "nt":
        return
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    except OSError as error:
        # Some network file systems cannot sync a folder and say so; the files are synced.
        if error.errno not in (errno.EINVAL, errno.ENOTSUP, errno.EBADF):
            raise
    finally:
        os.close(descriptor)
