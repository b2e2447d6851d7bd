"""Study keys and patient keys: the only names that a study goes by outside its report.

A plain hash of a patient ID can be undone by trying all IDs; a keyed one cannot, as long as the
secret stays apart (faults sheet, K4). The secret is made on first use.
"""

from __future__ import annotations

import hashlib
import hmac
import os
import secrets
import stat
import time
from contextlib import suppress
from pathlib import Path

from liverfe.errors import UsageError
from liverfe.journey.configuration import configuration_folder
from liverfe.wording.command_line import SECRET_DAMAGED, SECRET_NOT_WRITABLE

_FILE_NAME = "secret.key"

_SECRET_BYTES = 32
"""As long as the digest, as RFC 2104 recommends."""

_KEY_DIGITS = 16
"""Length of a key that the output folder promises: 64 bits."""

_WRITER_PATIENCE_S = 2.0
"""How long to wait for another process that is writing the secret at this moment."""


def key_of(text: str, secret: bytes) -> str:
    """Make the key of a study or a patient.

    Parameters
    ----------
    text : str
        Study Instance UID, absolute path, or patient ID.
    secret : bytes
        From `load_secret`.

    Returns
    -------
    str
        The first 16 hex digits of HMAC-SHA256; empty for an empty text, which names nobody.
    """
    if not text:
        return ""
    return hmac.new(secret, text.encode("utf-8", "surrogateescape"), hashlib.sha256).hexdigest()[
        :_KEY_DIGITS
    ]


def load_secret(folder: Path | None = None) -> bytes:
    """Read this user's secret, or make it on first use.

    Safe against several processes that start at once: all of them end up with the same secret.

    Parameters
    ----------
    folder : Path, optional
        Where it lies; the configuration folder by default.

    Returns
    -------
    bytes
        32 random bytes.

    Raises
    ------
    UsageError
        If the file is damaged or cannot be written: going on would give studies new keys.
    """
    place = (folder or configuration_folder()) / _FILE_NAME
    try:
        if not place.exists():
            _create(place)
        _close_to_others(place)
        return _read(place)
    except OSError as error:
        raise UsageError(
            SECRET_NOT_WRITABLE.format(path=place, reason=error.strerror or error)
        ) from error


def peek_secret(folder: Path | None = None) -> bytes | None:
    """Read this user's secret where there is one, and make none.

    Parameters
    ----------
    folder : Path, optional
        Where it lies; the configuration folder by default.

    Returns
    -------
    bytes or None
        None before the first run.
    """
    place = (folder or configuration_folder()) / _FILE_NAME
    return load_secret(folder) if place.exists() else None


def _create(place: Path) -> None:
    """Put a new secret at `place` unless somebody else was first; never a half-written one."""
    place.parent.mkdir(mode=0o700, parents=True, exist_ok=True)
    draft = place.with_name(f".{_FILE_NAME}.{os.getpid()}.{secrets.token_hex(4)}")
    text = secrets.token_hex(_SECRET_BYTES)
    _write_new(draft, text)
    try:
        # A hard link appears whole, and fails where the name is taken: the race has one winner.
        os.link(draft, place)
    except FileExistsError:
        pass
    except OSError:
        # A file system without hard links: create in place, and let readers wait for the rest.
        with suppress(FileExistsError):
            _write_new(place, text)
    finally:
        draft.unlink(missing_ok=True)


def _write_new(place: Path, text: str) -> None:
    handle = os.open(place, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
    with os.fdopen(handle, "w", encoding="ascii") as file:
        file.write(text)
        file.flush()
        os.fsync(file.fileno())


def _close_to_others(place: Path) -> None:
    """Take reading away from others, where the file system knows such a thing."""
    if os.name != "posix":
        return
    if stat.S_IMODE(place.stat().st_mode) & 0o077:
        place.chmod(0o600)


def _read(place: Path) -> bytes:
    patience_ends = time.monotonic() + _WRITER_PATIENCE_S
    while True:
        text = place.read_text(encoding="ascii", errors="replace").strip()
        try:
            secret = bytes.fromhex(text)
        except ValueError:
            secret = b""
        if len(secret) == _SECRET_BYTES:
            return secret
        if time.monotonic() > patience_ends:
            raise UsageError(SECRET_DAMAGED.format(path=place))
        time.sleep(0.02)
