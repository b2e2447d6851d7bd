"""The rules of the house that import-linter cannot see. Each returns its complaints.

Every rule takes the repository, so that `test_rules_catch.py` can hand it a small one with a fault
planted in it: a rule that cannot fail is worse than none.
"""

from __future__ import annotations

import ast
import re
from collections.abc import Iterator
from pathlib import Path

from tests.architecture.tree import Source, imported_modules, project_files, python_sources

DOORS = {"cli", "batch"}
"""Rooms that turn a call into one other call: no arithmetic there."""
FILE_ROOMS = {"acquire", "phantom", "report", "export", "journey", "batch", "cli"}
"""Rooms that may touch files and screens; all others are the middle."""
OPEN_ROOMS = {"wording"}
"""Rooms of words alone: their public files may be named from outside."""
LONGEST_FILE = 400
VAGUE_NAMES = {"utils", "util", "helpers", "helper", "common", "manager", "misc"}
TOP_LEVEL = {
    "README.md", "DEVELOPERS.md", "pyproject.toml", "requirements.lock", "LICENSE",
    "liverfe", "tests", "phantoms", "scripts", "docs",
}  # fmt: skip


def entered_past_the_front_door(repository: Path) -> list[str]:
    """Find imports of another room's inner modules: rooms are entered by their front door."""
    complaints = []
    sources = python_sources(repository, "liverfe")
    exported = {source.room: _exports(source) for source in sources if _is_front_door(source)}
    for source in sources:
        for node in ast.walk(source.tree):
            if isinstance(node, ast.Import):
                taken = [(alias.name, "") for alias in node.names]
            elif isinstance(node, ast.ImportFrom):
                taken = [(node.module or "", alias.name) for alias in node.names]
            else:
                continue
            complaints += [
                f"{source.path}:{node.lineno} enters {module}.{name}".rstrip(".")
                for module, name in taken
                if _passes_the_front_door(repository, source, module, name, exported)
            ]
    return complaints


def _passes_the_front_door(
    repository: Path, source: Source, module: str, name: str, exported: dict[str, set[str]]
) -> bool:
    package, room, *inner = [*module.split("."), "", ""]
    inner = [part for part in inner if part]
    if package != "liverfe" or room in {"", source.room}:
        return False
    if not inner and (not name or name in exported.get(room, set())):
        return False
    if not inner and not (repository / "liverfe" / room / f"{name}.py").is_file():
        return name.startswith("_")
    return room not in OPEN_ROOMS or any(part.startswith("_") for part in [*inner, name])


def _is_front_door(source: Source) -> bool:
    return source.path.count("/") == (2 if source.path.endswith("/__init__.py") else 1)


def _exports(source: Source) -> set[str]:
    """Read the names in a module's ``__all__``."""
    for node in source.tree.body:
        if isinstance(node, ast.Assign) and ast.unparse(node.targets[0]) == "__all__":
            return set(ast.literal_eval(node.value))
    return set()


def arithmetic_at_the_doors(repository: Path) -> list[str]:
    """Find sums, products and rounding in the rooms that only pass calls on."""
    complaints = []
    for source in python_sources(repository, "liverfe"):
        if source.room not in DOORS:
            continue
        found: dict[int, str] = {}
        for node in ast.walk(source.tree):
            sums = (
                (isinstance(node, ast.AugAssign) and not _joins(node.op, node.target, node.value))
                or (isinstance(node, ast.BinOp) and not _joins(node.op, node.left, node.right))
                or (isinstance(node, ast.Call) and ast.unparse(node.func) in _SUMMING_CALLS)
            )
            if sums:
                found.setdefault(node.lineno, ast.unparse(node))
        complaints += [f"{source.path}:{line} {text}" for line, text in found.items()]
        complaints += [
            f"{source.path}:{line} imports {name}"
            for line, name in imported_modules(source)
            if name in {"math", "statistics", "numpy", "scipy"}
        ]
    return complaints


_SUMMING_CALLS = {"sum", "round", "abs", "pow", "divmod"}
_PATH_LIKE = re.compile(r"(path|folder|dir|root|out|parent|home|file|cwd\(\)|Path\(.*\))$")


def _joins(operator: ast.operator, left: ast.expr, right: ast.expr) -> bool:
    """Tell whether an operator joins words, lists, paths, types or sets rather than numbers."""
    if isinstance(operator, ast.BitOr | ast.BitAnd):
        return True
    sides = (left, right)
    if isinstance(operator, ast.Add):
        return any(_is_text(side) or isinstance(side, _LISTS) for side in sides)
    if isinstance(operator, ast.Mod):
        return _is_text(left)
    if isinstance(operator, ast.Div):
        return any(_is_text(side) for side in sides) or bool(
            _PATH_LIKE.search(ast.unparse(left)) and not isinstance(right, ast.Constant)
        )
    return False


_LISTS = (ast.List, ast.ListComp, ast.Tuple)


def _is_text(node: ast.expr) -> bool:
    if isinstance(node, ast.BinOp) and isinstance(node.op, ast.Add | ast.Div):
        return _is_text(node.left) or _is_text(node.right)
    if isinstance(node, ast.IfExp):
        return _is_text(node.body) or _is_text(node.orelse)
    constant_text = isinstance(node, ast.Constant) and isinstance(node.value, str)
    return constant_text or isinstance(node, ast.JoinedStr)


def files_touched_in_the_middle(repository: Path) -> list[str]:
    """Find calls that reach a file, a screen or a module by name in the rooms of science."""
    complaints = []
    for source in python_sources(repository, "liverfe"):
        if source.room in FILE_ROOMS or not source.room:
            continue
        for call in (node for node in ast.walk(source.tree) if isinstance(node, ast.Call)):
            name = ast.unparse(call.func)
            packaged = "files(" in name or name.startswith(("resources.", "importlib.resources."))
            if not packaged and (name in _REACHING_CALLS or _REACHING_METHOD.search(name)):
                complaints.append(f"{source.path}:{call.lineno} {name}(...)")
    return complaints


_REACHING_CALLS = {"open", "print", "input", "exec", "eval", "__import__", "import_module"}
_REACHING_METHOD = re.compile(
    r"\bnp\.(load|save|savez|loadtxt|savetxt|genfromtxt|fromfile|memmap)$|import_module$"
    r"|\.(tofile|write_text|write_bytes)$"
)


def vague_names(repository: Path) -> list[str]:
    """Find files and folders whose name says nothing of what lives there."""
    complaints = []
    for name in project_files(repository):
        words = {word for part in Path(name).with_suffix("").parts for word in part.split("_")}
        if words & VAGUE_NAMES:
            complaints.append(name)
    return complaints


def long_files(repository: Path) -> list[str]:
    """Find Python files that no longer fit a reader's head."""
    sources = python_sources(repository, "liverfe", "tests", "scripts", "docs")
    lengths = {source.path: source.text.count("\n") for source in sources}
    return [f"{path}: {n} lines" for path, n in lengths.items() if n > LONGEST_FILE]


def top_level(repository: Path) -> list[str]:
    """Compare the top level with the list in DEVELOPERS.md; dot files are free."""
    found = {name.split("/")[0] for name in project_files(repository)}
    found = {name for name in found if not name.startswith(".")}
    extra = [f"not in the house: {name}" for name in sorted(found - TOP_LEVEL)]
    return extra + [f"missing: {name}" for name in sorted(TOP_LEVEL - found)]


def machine_addresses(repository: Path) -> list[str]:
    """Find places of one machine and hosts of package registries: the project travels."""
    complaints = []
    for name in project_files(repository):
        try:
            text = (repository / name).read_text(encoding="utf-8")
        except UnicodeDecodeError:
            continue
        for number, line in enumerate(text.splitlines(), 1):
            if _ADDRESS.search(line):
                complaints.append(f"{name}:{number} {line.strip()[:80]}")
    return complaints


_ADDRESS = re.compile(
    # Written in pieces, lest this file complain of itself.
    r"(?<![\w.:/])/(?:work|root|home|Users)/\w" + r"|[A-Z]:\\{1,2}Users"
    r"|pypi\.(?:org|python)" + r"|python" + r"hosted|registry\." + r"npmjs|deb\." + r"debian"
    r"|file:/" + r"/+\w|--find-" + r"links|(?:extra-)?index-" + r"url",
)


def undocumented(repository: Path) -> list[str]:
    """Find public modules, classes, functions and methods of the package without a docstring."""
    complaints = []
    for source in python_sources(repository, "liverfe"):
        if ast.get_docstring(source.tree) is None and source.text.strip():
            complaints.append(f"{source.path}: the module")
        complaints += [
            f"{source.path}:{node.lineno} {node.name}"
            for node in _public(source.tree)
            if ast.get_docstring(node) is None
        ]
    return complaints


def _public(
    tree: ast.Module | ast.ClassDef,
) -> Iterator[ast.FunctionDef | ast.AsyncFunctionDef | ast.ClassDef]:
    for node in tree.body:
        named = isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef | ast.ClassDef)
        overloaded = named and "overload" in map(ast.unparse, node.decorator_list)
        if named and not overloaded and not node.name.startswith("_"):
            yield node
            if isinstance(node, ast.ClassDef):
                yield from _public(node)


def rooms_told_wrongly(repository: Path) -> list[str]:
    """Compare the rooms on disk with the table in `liverfe/__init__.py`, in both directions."""
    table = (repository / "liverfe" / "__init__.py").read_text(encoding="utf-8")
    told = re.findall(r"^(\w+)  +\S.*$", table.split('"""')[1], re.MULTILINE)
    told = [name for name in told if name != "room" and name.islower()]
    rooms = {
        source.room
        for source in python_sources(repository, "liverfe")
        if source.room and not source.room.startswith("_")
    }
    missing = [f"not in the table: {name}" for name in sorted(rooms - set(told))]
    return missing + [f"in the table alone: {name}" for name in told if name not in rooms]


def untested_rooms(repository: Path) -> list[str]:
    """Find rooms without a folder of tests, and folders of tests without a room."""
    of_no_room = {"architecture", "journey", "docs", "bench", "browser", "statistics"}
    files = project_files(repository)
    tested = {
        name.split("/")[1]
        for name in files
        if name.startswith("tests/") and name.count("/") > 1 and "/test_" in name
    }
    rooms = {source.room for source in python_sources(repository, "liverfe") if source.room}
    rooms = {name for name in rooms if not name.startswith("_")}
    missing = [f"no tests/{name}/" for name in sorted(rooms - tested)]
    return missing + [
        f"tests/{name}/: no such room" for name in sorted(tested - rooms - of_no_room)
    ]
