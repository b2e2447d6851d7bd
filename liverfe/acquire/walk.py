"""Which files an input holds, told apart by their content and never by their suffix."""

from __future__ import annotations

import os
import zlib
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from liverfe.echoes import LeftOut
from liverfe.errors import UsageError

Content = Literal["dicom", "nifti", "json", "other"]

_N_SNIFFED = 352
"""Bytes that tell a file's kind: the NIfTI-1 header and its magic end at byte 348."""

_RESULT_MARKS = ("manifest.json", "result.json")
"""A folder that holds both is a result of ours, not an input."""

_BARE_DICOM_GROUPS = (b"\x08\x00", b"\x02\x00")
"""First two bytes of a DICOM file that lost its preamble (little endian)."""


@dataclass(frozen=True, slots=True)
class FoundFile:
    """One file of the input.

    Attributes
    ----------
    path : Path
        Where it is.
    content : {'dicom', 'nifti', 'json', 'other'}
        What its first bytes say.
    n_bytes : int
        Its size.
    is_named : bool
        True where the user named this very file, False where a folder was walked.
    """

    path: Path
    content: Content
    n_bytes: int
    is_named: bool


def list_files(inputs: Sequence[Path]) -> tuple[list[FoundFile], list[LeftOut]]:
    """List the files of `inputs`, folders walked without following symbolic links.

    Parameters
    ----------
    inputs : sequence of Path
        Files and folders.

    Returns
    -------
    files : list of FoundFile
        Each once, folders in the order of their names.
    left_out : list of LeftOut
        Links, results of liverfe and empty files that were passed over.

    Raises
    ------
    UsageError
        If an input does not exist.
    """
    seen: set[Path] = set()
    files: list[FoundFile] = []
    passed: dict[str, int] = {}
    for given in inputs:
        if not given.exists():
            raise UsageError(f"input {given.name!r} does not exist; check the path.")
        candidates: Iterable[Path] = _walk(given, passed) if given.is_dir() else [given]
        for path in candidates:
            if path in seen:
                continue
            seen.add(path)
            try:
                size = path.stat().st_size
                content = _content(path) if size else "other"
            except OSError:
                passed["unreadable file"] = passed.get("unreadable file", 0) + 1
                continue
            if size == 0:
                passed["empty file"] = passed.get("empty file", 0) + 1
                continue
            files.append(FoundFile(path, content, size, path == given))
    return files, [LeftOut(what=what, n_files=n, why=_WHY[what]) for what, n in passed.items()]


_WHY = {
    "empty file": "it holds nothing",
    "unreadable file": "the system does not let us read it",
    "unreadable folder": "the system does not let us read it",
    "symbolic link": "links inside a folder are not followed",
    "result folder of liverfe": "results are no input",
}


def _walk(folder: Path, passed: dict[str, int]) -> Iterator[Path]:
    try:
        entries = sorted(os.scandir(folder), key=lambda entry: entry.name)
    except OSError:
        passed["unreadable folder"] = passed.get("unreadable folder", 0) + 1
        return
    names = {entry.name for entry in entries}
    if all(mark in names for mark in _RESULT_MARKS):
        passed["result folder of liverfe"] = passed.get("result folder of liverfe", 0) + 1
        return
    for entry in entries:
        if entry.name.startswith("."):
            continue
        if entry.is_symlink():
            passed["symbolic link"] = passed.get("symbolic link", 0) + 1
        elif entry.is_dir(follow_symlinks=False):
            yield from _walk(Path(entry.path), passed)
        elif entry.is_file(follow_symlinks=False):
            yield Path(entry.path)


def _content(path: Path) -> Content:
    with path.open("rb") as file:
        start = file.read(_N_SNIFFED)
        if start[:2] == b"\x1f\x8b":
            start = _inflated_start(start + file.read(8192))
    if start[128:132] == b"DICM" or start[:2] in _BARE_DICOM_GROUPS:
        return "dicom"
    if start[344:347] in (b"n+1", b"ni1") or start[4:7] in (b"n+2", b"ni2"):
        return "nifti"
    if start.lstrip()[:1] == b"{":
        return "json"
    return "other"


def _inflated_start(packed: bytes) -> bytes:
    try:
        return zlib.decompressobj(wbits=31).decompress(packed, _N_SNIFFED)
    except zlib.error:
        return b""
