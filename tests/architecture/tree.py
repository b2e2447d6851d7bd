"""The project as the architecture tests see it: its files, and its Python parsed once."""

from __future__ import annotations

import ast
import subprocess
from dataclasses import dataclass
from pathlib import Path

MADE_HERE = {"__pycache__", "build", "dist", "liverfe-demo", "_build"}
"""Folders that tools make, beside hidden ones; where git is at hand, `.gitignore` decides."""


@dataclass(frozen=True, kw_only=True)
class Source:
    """One Python file."""

    path: str
    """As seen from the repository, with forward slashes."""
    text: str
    tree: ast.Module

    @property
    def room(self) -> str:
        """The room that the file belongs to, or an empty word outside the package's rooms."""
        parts = self.path.removesuffix(".py").split("/")
        return parts[1] if parts[0] == "liverfe" and parts[1:] != ["__init__"] else ""


def project_files(repository: Path) -> list[str]:
    """List the project's own files, as seen from `repository`."""
    if (repository / ".git").exists():
        listed = subprocess.run(
            ["git", "ls-files", "-z", "--cached", "--others", "--exclude-standard"],
            cwd=repository,
            capture_output=True,
            text=True,
            check=False,
        )
        if listed.returncode == 0:
            return sorted(
                name for name in listed.stdout.split("\0") if (repository / name).is_file()
            )
    found = (path.relative_to(repository) for path in repository.rglob("*") if path.is_file())
    return sorted(path.as_posix() for path in found if not _made_here(path))


def _made_here(path: Path) -> bool:
    folders = path.parts[:-1]
    hidden = any(folder.startswith(".") and folder != ".ci" for folder in folders)
    return hidden or not MADE_HERE.isdisjoint(folders)


def python_sources(repository: Path, *folders: str) -> list[Source]:
    """Parse the Python files that lie in `folders`."""
    sources = []
    for name in project_files(repository):
        if name.endswith(".py") and name.split("/")[0] in folders:
            text = (repository / name).read_text(encoding="utf-8")
            sources.append(Source(path=name, text=text, tree=ast.parse(text, name)))
    return sources


def imported_modules(source: Source) -> list[tuple[int, str]]:
    """List line and dotted name of each import; of ``from a import b`` both ``a`` and ``a.b``."""
    found: list[tuple[int, str]] = []
    for node in ast.walk(source.tree):
        if isinstance(node, ast.Import):
            found += [(node.lineno, alias.name) for alias in node.names]
        elif isinstance(node, ast.ImportFrom) and node.module:
            found.append((node.lineno, node.module))
            found += [(node.lineno, f"{node.module}.{alias.name}") for alias in node.names]
    return found
