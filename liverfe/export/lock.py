"""One run a folder: the second is refused with the first one's process id.

The lock is the operating system's own on a small file beside the folder, so it goes when its
process goes, however it ends: there is no stale lock to judge by process ids, which get reused.
"""

from __future__ import annotations

import errno
import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from dataclasses import dataclass
from pathlib import Path

from liverfe.errors import UsageError
from liverfe.export.disk import plain_disk_errors
from liverfe.wording.export import FOLDER_IN_USE

__all__ = ["LockedFolder", "lock_folder"]

_HELD_BY_ANOTHER = (errno.EAGAIN, errno.EWOULDBLOCK, errno.EACCES, errno.EDEADLK)
"""What a lock that is taken answers; Windows says EACCES or EDEADLK."""

_NO_LOCKS_HERE = (errno.ENOLCK, errno.ENOSYS, errno.ENOTSUP)


@dataclass(frozen=True, slots=True, kw_only=True)
class LockedFolder:
    """A result folder that this process alone may write; comes from `lock_folder`.

    Attributes
    ----------
    path : Path
        The folder; it need not exist yet.
    """

    path: Path


@contextmanager
def lock_folder(folder: Path) -> Iterator[LockedFolder]:
    """Keep every other run out of a result folder.

    Parameters
    ----------
    folder : Path
        ``DIR/<study key>``; its parent is made where it is missing.

    Yields
    ------
    LockedFolder
        What `write_result` takes.

    Raises
    ------
    UsageError
        If another run holds it, with that run's process id, or the disk refuses.
    """
    path = folder.parent / f".{folder.name}.lock"
    with plain_disk_errors(folder.name):
        folder.parent.mkdir(parents=True, exist_ok=True)
        descriptor = _take(path, folder.name)
    try:
        yield LockedFolder(path=folder)
    finally:
        _release(descriptor, path)


def _take(path: Path, folder_name: str) -> int:
    while True:
        descriptor = os.open(path, os.O_RDWR | os.O_CREAT, 0o666)
        try:
            _lock(descriptor)
            if _is_still(path, descriptor):
                os.ftruncate(descriptor, 0)
                os.write(descriptor, f"{os.getpid()}\n".encode())
                return descriptor
        except OSError as error:
            if error.errno not in _HELD_BY_ANOTHER:
                os.close(descriptor)
                raise
            pid = os.read(descriptor, 32).decode("ascii", "replace").strip() or "unknown"
            os.close(descriptor)
            raise UsageError(FOLDER_IN_USE.format(name=folder_name, pid=pid)) from None
        # The holder removed the file between our opening and locking it: take the new one.
        os.close(descriptor)


def _is_still(path: Path, descriptor: int) -> bool:
    try:
        return os.path.samestat(os.stat(path), os.fstat(descriptor))
    except FileNotFoundError:
        return False


if sys.platform == "win32":  # pragma: no cover
    import msvcrt

    _LOCKED_BYTE = 1 << 20
    """Far behind the process id: a locked byte cannot be read by others there."""

    def _lock(descriptor: int) -> None:
        os.lseek(descriptor, _LOCKED_BYTE, os.SEEK_SET)
        try:
            msvcrt.locking(descriptor, msvcrt.LK_NBLCK, 1)
        finally:
            os.lseek(descriptor, 0, os.SEEK_SET)

    def _release(descriptor: int, path: Path) -> None:
        os.close(descriptor)
        with suppress(OSError):  # another run has opened it already: then it stays
            path.unlink()

else:
    import fcntl

    def _lock(descriptor: int) -> None:
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError as error:
            # A network share without locks: each run still writes a folder of its own, and the
            # rename at the end lets only whole results into place.
            if error.errno not in _NO_LOCKS_HERE:
                raise

    def _release(descriptor: int, path: Path) -> None:
        # Removed while it is still held: whoever waits behind it finds it gone and starts anew.
        with suppress(OSError):
            path.unlink()
        os.close(descriptor)
