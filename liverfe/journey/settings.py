"""Settings and where each came from: flag, environment, project file, user file, default.

The first of these that states a setting wins. Files and variables are named in
`docs/reference/command-line.md`.
"""

from __future__ import annotations

import difflib
import os
import tomllib
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal

from liverfe.errors import UsageError
from liverfe.journey.configuration import configuration_folder
from liverfe.wording.command_line import (
    DID_YOU_MEAN,
    ORIGIN_DEFAULT,
    ORIGIN_ENVIRONMENT,
    ORIGIN_FLAG,
    ORIGIN_PROJECT_FILE,
    ORIGIN_USER_FILE,
    SETTING_NOT_POSSIBLE,
    SETTING_UNKNOWN,
    SETTINGS_FILE_UNREADABLE,
)

PROJECT_FILE = "liverfe.toml"
"""Settings of the working folder."""

USER_FILE = "config.toml"
"""Settings of the user, in the configuration folder."""

Identity = Literal["full", "key"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Settings:
    """What a run was asked for.

    Attributes
    ----------
    curve, bands : str or None
        Keys of curve and band set; None: the field's default, the house's set.
    method : Path or None
        A method file.
    identity : {'full', 'key'}
        What the report may carry.
    workers : int or None
        Worker processes of a batch; None: as many as there are processors.
    timeout_min : float
        Minutes that one study of a batch may take.
    curve_file : tuple of Path
        A site's own curves.
    origins : mapping
        Where each of them came from, in words.
    ranks : mapping
        The same as a number: 0 flag, 1 environment, 2 project file, 3 user file, 4 default.
    """

    curve: str | None = None
    bands: str | None = None
    method: Path | None = None
    identity: Identity = "full"
    workers: int | None = None
    timeout_min: float = 30.0
    curve_file: tuple[Path, ...] = ()
    origins: Mapping[str, str] = field(default_factory=dict)
    ranks: Mapping[str, int] = field(default_factory=dict)

    @property
    def timeout_s(self) -> float:
        """Seconds that one study of a batch may take."""
        return self.timeout_min * 60.0

    def explained(self) -> dict[str, dict[str, object]]:
        """Give each setting with its origin, ready for JSON."""
        shown: dict[str, dict[str, object]] = {}
        for name in _READERS:
            value = getattr(self, name)
            if isinstance(value, Path):
                value = str(value)
            elif isinstance(value, tuple):
                value = [str(path) for path in value]
            shown[name] = {"value": value, "origin": self.origins.get(name, ORIGIN_DEFAULT)}
        return shown


def resolve_settings(
    flags: Mapping[str, object],
    *,
    environment: Mapping[str, str] | None = None,
    working_folder: Path | None = None,
) -> Settings:
    """Settle every setting by precedence.

    Parameters
    ----------
    flags : mapping
        What the command line says; None or an empty list: nothing.
    environment : mapping, optional
        Environment variables; those of this process by default.
    working_folder : Path, optional
        Where the project file is looked for; the current one by default.

    Returns
    -------
    Settings
        Each with its origin.

    Raises
    ------
    UsageError
        If a file cannot be read, a setting is unknown, or a value is not possible.
    """
    variables = os.environ if environment is None else environment
    folder = working_folder or Path.cwd()
    project_file, user_file = folder / PROJECT_FILE, configuration_folder(variables) / USER_FILE
    layers: list[tuple[str, Mapping[str, object], Path]] = [
        (ORIGIN_FLAG, flags, folder),
        (ORIGIN_ENVIRONMENT, _from_environment(variables), folder),
        (ORIGIN_PROJECT_FILE.format(path=project_file), _from_file(project_file), folder),
        (ORIGIN_USER_FILE.format(path=user_file), _from_file(user_file), user_file.parent),
    ]
    values: dict[str, object] = {}
    origins: dict[str, str] = {}
    ranks: dict[str, int] = {}
    for rank, (origin, stated, base) in enumerate(layers):
        for name, raw in stated.items():
            if name in values or raw is None or raw in ([], ()):
                continue
            where = origin.format(name=_variable(name), option=_option(name))
            values[name] = _READERS[name](raw, base, where)
            origins[name], ranks[name] = where, rank
    return Settings(**values, origins=origins, ranks=ranks)  # type: ignore[arg-type]


def nearest(word: str, known: list[str]) -> str:
    """Give a sentence that proposes the nearest spelling.

    Parameters
    ----------
    word : str
        As it was typed.
    known : list of str
        What there is.

    Returns
    -------
    str
        With a space before it; empty where nothing is near.
    """
    close = difflib.get_close_matches(word, known, n=1, cutoff=0.5)
    return DID_YOU_MEAN.format(word=close[0]) if close else ""


def _from_environment(variables: Mapping[str, str]) -> dict[str, object]:
    found = {name: variables.get(_variable(name)) for name in _READERS}
    stated: dict[str, object] = {name: text for name, text in found.items() if text}
    if "curve_file" in stated:
        stated["curve_file"] = [p for p in str(stated["curve_file"]).split(os.pathsep) if p]
    return stated


def _from_file(path: Path) -> dict[str, object]:
    if not path.is_file():
        return {}
    try:
        stated = tomllib.loads(path.read_text(encoding="utf-8"))
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as error:
        raise UsageError(SETTINGS_FILE_UNREADABLE.format(path=path, reason=error)) from error
    for name in stated:
        if name not in _READERS:
            raise UsageError(
                SETTING_UNKNOWN.format(
                    path=path,
                    name=name,
                    nearest=nearest(name, list(_READERS)),
                    known=", ".join(_READERS),
                )
            )
    return stated


def _variable(name: str) -> str:
    return f"LIVERFE_{name.upper()}"


def _option(name: str) -> str:
    return f"--{name.replace('_', '-')}"


def _text(raw: object, base: Path, where: str) -> str:
    if not isinstance(raw, str) or not raw.strip():
        raise _not_possible(raw, where, "a key")
    return raw.strip()


def _identity(raw: object, base: Path, where: str) -> str:
    if raw not in ("full", "key"):
        raise _not_possible(raw, where, "full or key")
    return str(raw)


def _workers(raw: object, base: Path, where: str) -> int:
    wanted = "a whole number from 1 to 256"
    if isinstance(raw, bool) or not isinstance(raw, int | str):
        raise _not_possible(raw, where, wanted)
    try:
        number = int(raw)
    except ValueError:
        raise _not_possible(raw, where, wanted) from None
    if not 1 <= number <= 256:
        raise _not_possible(raw, where, wanted)
    return number


def _minutes(raw: object, base: Path, where: str) -> float:
    wanted = "minutes, more than 0 and at most 1440"
    if isinstance(raw, bool) or not isinstance(raw, int | float | str):
        raise _not_possible(raw, where, wanted)
    try:
        number = float(raw)
    except ValueError:
        raise _not_possible(raw, where, wanted) from None
    if not 0 < number <= 1440:
        raise _not_possible(raw, where, wanted)
    return number


def _path(raw: object, base: Path, where: str) -> Path:
    if not isinstance(raw, str | Path) or not str(raw):
        raise _not_possible(raw, where, "a file")
    # A path in a settings file is meant from that file, not from wherever the command runs.
    return base / Path(raw).expanduser()


def _paths(raw: object, base: Path, where: str) -> tuple[Path, ...]:
    entries = raw if isinstance(raw, list | tuple) else [raw]
    return tuple(_path(entry, base, where) for entry in entries)


def _not_possible(raw: object, where: str, wanted: str) -> UsageError:
    return UsageError(SETTING_NOT_POSSIBLE.format(where=where, value=raw, wanted=wanted))


_READERS: dict[str, Callable[[object, Path, str], object]] = {
    "curve": _text,
    "bands": _text,
    "method": _path,
    "identity": _identity,
    "workers": _workers,
    "timeout_min": _minutes,
    "curve_file": _paths,
}
"""Every setting that a file or a variable may state, and how its value is read."""
