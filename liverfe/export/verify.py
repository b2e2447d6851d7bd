"""Is a result folder still what its manifest says?"""

from __future__ import annotations

import hashlib
import os
import re
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal

from liverfe.errors import UsageError
from liverfe.export.manifest import MANIFEST_NAME, read_manifest
from liverfe.wording.export import DIFFERENCE_WORDS, NO_RESULT_HERE

__all__ = ["Difference", "find_results", "verify_folder", "verify_one"]

Kind = Literal["changed", "missing", "extra", "unfinished", "unreadable"]

_SIGNS_OF_A_RESULT = (MANIFEST_NAME, "result.json", "report.pdf", "regions.csv", "maps")

_RESULT_NAME = re.compile(r"[0-9a-f]{16}(-[0-9]+)?(\.v[0-9]+)?")

_LEFT_BY_FILE_BROWSERS = (".DS_Store", "Thumbs.db", "desktop.ini")
"""Looking at a folder must not count as changing it."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Difference:
    """One way in which a folder is not what its manifest says.

    Attributes
    ----------
    folder : str
        Name of the result folder.
    path : str
        The file in it; ``manifest.json`` where that is missing or damaged.
    kind : {'changed', 'missing', 'extra', 'unfinished', 'unreadable'}
        What is wrong.
    """

    folder: str
    path: str
    kind: Kind

    @property
    def text(self) -> str:
        """The difference in one sentence."""
        return f"{self.folder}/{self.path} {DIFFERENCE_WORDS[self.kind]}"


def verify_folder(path: Path) -> tuple[Difference, ...]:
    """Hash a result folder again, or each one in a folder of several.

    Parameters
    ----------
    path : Path
        ``DIR/<study key>``, or ``DIR``.

    Returns
    -------
    tuple of Difference
        Empty where every file of every result is as it was written.

    Raises
    ------
    UsageError
        If there is no result at all: then nothing was verified.
    """
    results = find_results(path)
    if not results:
        raise UsageError(NO_RESULT_HERE.format(name=path.name))
    return tuple(difference for result in results for difference in verify_one(result))


def find_results(path: Path) -> tuple[Path, ...]:
    """Find the result folders that `verify_folder` would look at.

    Parameters
    ----------
    path : Path
        A result folder, or a folder of several.

    Returns
    -------
    tuple of Path
        Sorted by name; older versions and unfinished ones are among them.
    """
    if not path.is_dir():
        return ()
    if _looks_like_a_result(path):
        return (path,)
    return tuple(sorted(p for p in path.iterdir() if p.is_dir() and _looks_like_a_result(p)))


def verify_one(folder: Path) -> tuple[Difference, ...]:
    """Hash one result folder again.

    Parameters
    ----------
    folder : Path
        ``DIR/<study key>``.

    Returns
    -------
    tuple of Difference
        Empty where every file is as it was written.
    """
    try:
        manifest = read_manifest((folder / MANIFEST_NAME).read_bytes())
        stated = {str(output["path"]): output for output in manifest["outputs"]}
    except FileNotFoundError:
        return (_difference(folder, MANIFEST_NAME, "unfinished"),)
    except (OSError, ValueError, KeyError, TypeError):
        return (_difference(folder, MANIFEST_NAME, "unreadable"),)
    there = set(_files_in(folder)) - {MANIFEST_NAME}
    differences = [_difference(folder, path, "missing") for path in stated.keys() - there]
    differences += [_difference(folder, path, "extra") for path in there - stated.keys()]
    for path in there & stated.keys():
        try:
            if not _is_as_stated(folder / path, stated[path]):
                differences.append(_difference(folder, path, "changed"))
        except OSError:
            differences.append(_difference(folder, path, "unreadable"))
    return tuple(sorted(differences, key=lambda difference: difference.path))


def _difference(folder: Path, path: str, kind: Kind) -> Difference:
    return Difference(folder=folder.name, path=path, kind=kind)


def _looks_like_a_result(folder: Path) -> bool:
    return _RESULT_NAME.fullmatch(folder.name) is not None or any(
        (folder / sign).exists() for sign in _SIGNS_OF_A_RESULT
    )


def _files_in(folder: Path) -> list[str]:
    """All files under a folder, relative; a link counts as a file and is not followed."""
    found = []
    for top, folders, files in os.walk(folder):
        links = [name for name in folders if (Path(top) / name).is_symlink()]
        for name in (*files, *links):
            if name not in _LEFT_BY_FILE_BROWSERS:
                found.append((Path(top) / name).relative_to(folder).as_posix())
    return found


def _is_as_stated(path: Path, stated: dict[str, Any]) -> bool:
    if path.is_symlink() or path.stat().st_size != stated["bytes"]:
        return False
    with path.open("rb") as file:
        return bool(hashlib.file_digest(file, "sha256").hexdigest() == stated["sha256"])
