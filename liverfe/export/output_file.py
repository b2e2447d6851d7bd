"""`OutputFile`: one file of a result folder, whole, before it meets the disk."""

from __future__ import annotations

import re
from dataclasses import dataclass

__all__ = ["OutputFile", "is_plain_path"]

_PART = re.compile(r"[A-Za-z0-9_][A-Za-z0-9._-]*")
"""A name that every file system takes: no separators, colons, spaces, hidden or parent folders."""


def is_plain_path(path: str) -> bool:
    """Tell whether a path stays inside its folder and is possible on every file system."""
    return all(_PART.fullmatch(part) for part in path.split("/"))


@dataclass(frozen=True, slots=True, kw_only=True)
class OutputFile:
    """One file of a result folder.

    Attributes
    ----------
    path : str
        Where it belongs in the folder, parts joined by ``/``: ``maps/sub-…_R2starmap.nii.gz``.
    content : bytes
        All of it.
    """

    path: str
    content: bytes

    def __post_init__(self) -> None:
        if not is_plain_path(self.path):
            raise ValueError(f"{self.path!r} is not a plain relative path of a result folder")
