"""Hold the docstring of every public name against numpydoc's rules; called by ``scripts/check``.

Public is what a room's front door exports by ``__all__``, with the public methods of its classes.
Which rules count stands in pyproject.toml, ``[tool.numpydoc_validation]``. A dataclass documents
its fields as attributes, so there the fields are compared with that section instead. A function of
one parameter, whose name says its unit, may say all in one paragraph.
"""

from __future__ import annotations

import dataclasses
import enum
import importlib
import inspect
import pkgutil
import sys
import tomllib
from collections.abc import Iterator
from pathlib import Path
from types import ModuleType

from numpydoc.docscrape import NumpyDocString
from numpydoc.validate import validate

OF_PARAMETERS = {"PR01", "PR02", "PR03", "PR04", "PR07", "PR10"}


def public_names(package: ModuleType) -> Iterator[tuple[str, object]]:
    """Walk the rooms' front doors and yield dotted name and object of what they export."""
    for room in pkgutil.iter_modules(package.__path__):
        if room.name.startswith("_"):
            continue
        module = importlib.import_module(f"{package.__name__}.{room.name}")
        for name in getattr(module, "__all__", []):
            thing = getattr(module, name)
            if not (inspect.isfunction(thing) or inspect.isclass(thing)):
                continue  # a constant or a type: its words stand beside it
            yield f"{module.__name__}.{name}", thing
            if inspect.isclass(thing):
                for method, value in vars(thing).items():
                    is_code = inspect.isroutine(value) or isinstance(value, property)
                    if is_code and not method.startswith("_"):
                        yield f"{module.__name__}.{name}.{method}", value


def says_all_in_one_paragraph(thing: object) -> bool:
    """Tell whether one paragraph is enough: one parameter at most, or a class that nobody calls."""
    if inspect.isclass(thing):
        return issubclass(thing, enum.Enum) or getattr(thing, "_is_protocol", False)
    if not callable(thing):
        return True
    named = [name for name in inspect.signature(thing).parameters if name not in {"self", "cls"}]
    return len(named) <= 1 and "\n\n" not in (inspect.getdoc(thing) or "")


def complaints_about(name: str, thing: object, checks: set[str]) -> list[str]:
    """Return what is wrong with the docstring of one public name."""
    is_noun = inspect.isclass(thing) and dataclasses.is_dataclass(thing)
    wanted = checks - OF_PARAMETERS if is_noun or says_all_in_one_paragraph(thing) else checks
    found = validate(name)
    complaints = [f"{name}: {code} {text}" for code, text in found["errors"] if code in wanted]
    if is_noun and thing.__doc__:
        told = {
            word.strip()
            for section in ("Attributes", "Parameters")
            for item in NumpyDocString(inspect.cleandoc(thing.__doc__))[section]
            for word in item.name.split(",")
        }
        fields = {field.name for field in dataclasses.fields(thing) if field.name[0] != "_"}
        complaints += [f"{name}: field {field} is not told" for field in sorted(fields - told)]
    return complaints


def main() -> int:
    """Print all complaints; 1 where there are any, or where nothing public was found."""
    sys.path.insert(0, str(Path.cwd()))
    settings = tomllib.loads(Path("pyproject.toml").read_text(encoding="utf-8"))
    checks = set(settings["tool"]["numpydoc_validation"]["checks"])
    names = list(public_names(importlib.import_module("liverfe")))
    complaints = [text for name, thing in names for text in complaints_about(name, thing, checks)]
    print("\n".join([*complaints, f"{len(names)} public names, {len(complaints)} complaints"]))
    return 1 if complaints or not names else 0


if __name__ == "__main__":
    sys.exit(main())
