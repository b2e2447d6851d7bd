"""`manifest.json`: what a result was made of and what it consists of, by hash.

It names no input file, since file names may carry a patient's name: an input is its SHA-256, its
size and what it was. Its last key is the hash of everything before it, so that a changed byte of
the manifest is found as well as one of a file. (Whoever changes a file and then writes a new
manifest is not found: that takes a signature.)
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from liverfe.export.output_file import OutputFile, is_plain_path

__all__ = [
    "MANIFEST_NAME",
    "InputFile",
    "Provenance",
    "fingerprint",
    "has_provenance",
    "manifest_bytes",
    "provenance_of",
    "read_manifest",
]

MANIFEST_NAME = "manifest.json"

_SCHEMA = 1

_OWN_HASH = "manifest_sha256"

_PROVENANCE_KEYS = ("key", "method", "settings", "software", "inputs")


@dataclass(frozen=True, slots=True, kw_only=True, order=True)
class InputFile:
    """One file that a result was made from.

    Attributes
    ----------
    role : str
        What it was: ``image``, ``regions``, ``curve``, ...; never its name.
    sha256 : str
        Hash of its bytes, 64 hex digits.
    n_bytes : int
        Its size.
    """

    role: str
    sha256: str
    n_bytes: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Provenance:
    """What a result is made of: the same provenance gives the same result.

    Attributes
    ----------
    key : str
        Study key.
    method_id : str
        `Method.id`.
    method_sha256 : str
        Hash of every choice of the method.
    software : mapping of str to str
        Versions.
    inputs : tuple of InputFile
        Sorted by role and hash: the order of reading says nothing, and file names show in none.
    settings : mapping of str to str
        Every other choice that changes a file, for example ``identity``.
    """

    key: str
    method_id: str
    method_sha256: str
    software: Mapping[str, str]
    inputs: tuple[InputFile, ...]
    settings: Mapping[str, str] = field(default_factory=dict)

    def __post_init__(self) -> None:
        object.__setattr__(self, "inputs", tuple(sorted(self.inputs)))


def provenance_of(
    *,
    key: str,
    method: Mapping[str, Any],
    software: Mapping[str, str],
    inputs: Iterable[InputFile],
    settings: Mapping[str, str] | None = None,
) -> Provenance:
    """Gather what a result is made of.

    Parameters
    ----------
    key : str
        Study key.
    method : mapping
        The ``method`` of a result document: its id and every choice.
    software : mapping of str to str
        Versions.
    inputs : iterable of InputFile
        All files that were read for it.
    settings : mapping of str to str, optional
        Every other choice that changes a file.

    Returns
    -------
    Provenance
        With the hash of the method.
    """
    choices = json.dumps(method, sort_keys=True, separators=(",", ":"), allow_nan=False)
    return Provenance(
        key=key,
        method_id=str(method["id"]),
        method_sha256=hashlib.sha256(choices.encode()).hexdigest(),
        software=dict(software),
        inputs=tuple(inputs),
        settings=dict(settings or {}),
    )


def fingerprint(path: Path, *, role: str) -> InputFile:
    """Hash an input file.

    Parameters
    ----------
    path : Path
        The file; it is only read.
    role : str
        What it is: ``image``, ``regions``, ...

    Returns
    -------
    InputFile
        Without the file's name.

    Raises
    ------
    OSError
        If it cannot be read.
    """
    with path.open("rb") as file:
        digest = hashlib.file_digest(file, "sha256").hexdigest()
        return InputFile(role=role, sha256=digest, n_bytes=file.tell())


def manifest_bytes(files: Iterable[OutputFile], provenance: Provenance) -> bytes:
    """Make the manifest of a result.

    Parameters
    ----------
    files : iterable of OutputFile
        All files of the result except the manifest.
    provenance : Provenance
        What it was made of.

    Returns
    -------
    bytes
        UTF-8 JSON; the same files and provenance give the same bytes.
    """
    outputs = [
        {
            "path": file.path,
            "sha256": hashlib.sha256(file.content).hexdigest(),
            "bytes": len(file.content),
        }
        for file in sorted(files, key=lambda file: file.path)
    ]
    content = {"schema": _SCHEMA, **_provenance_fields(provenance), "outputs": outputs}
    return _to_bytes({**content, _OWN_HASH: _own_hash(content)})


def read_manifest(raw: bytes) -> dict[str, Any]:
    """Read a manifest back.

    Parameters
    ----------
    raw : bytes
        Content of the file.

    Returns
    -------
    dict
        Its fields.

    Raises
    ------
    ValueError
        If a single byte of it is not as it was written, or a path leads out of the folder.
    """
    content = json.loads(raw)
    if not isinstance(content, dict) or raw != _to_bytes(content):
        raise ValueError("not the bytes of a manifest")
    stated = content.pop(_OWN_HASH, None)
    if stated != _own_hash(content):
        raise ValueError("its own hash differs")
    paths = [output["path"] for output in content["outputs"]]
    if content["schema"] != _SCHEMA or not all(is_plain_path(path) for path in paths):
        raise ValueError("not a manifest of this schema")
    return content


def has_provenance(manifest: Mapping[str, Any], provenance: Provenance) -> bool:
    """Tell whether a manifest, as read, is that of a result with this provenance."""
    wanted = _provenance_fields(provenance)
    return all(manifest.get(key) == wanted[key] for key in _PROVENANCE_KEYS)


def _provenance_fields(provenance: Provenance) -> dict[str, Any]:
    return {
        "key": provenance.key,
        "method": {"id": provenance.method_id, "sha256": provenance.method_sha256},
        "settings": dict(provenance.settings),
        "software": dict(provenance.software),
        "inputs": [
            {"n": n, "role": file.role, "sha256": file.sha256, "bytes": file.n_bytes}
            for n, file in enumerate(provenance.inputs, start=1)
        ],
    }


def _own_hash(content: Mapping[str, Any]) -> str:
    return hashlib.sha256(_to_bytes(content)).hexdigest()


def _to_bytes(content: Mapping[str, Any]) -> bytes:
    return f"{json.dumps(content, ensure_ascii=False, indent=1)}\n".encode()
