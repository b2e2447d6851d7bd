"""Where the user's own settings and secret live on this machine."""

from __future__ import annotations

import os
import sys
from collections.abc import Mapping
from pathlib import Path

_FOLDER_NAME = "liverfe"


def configuration_folder(environment: Mapping[str, str] | None = None) -> Path:
    """Tell the user's configuration folder; nothing is created.

    Parameters
    ----------
    environment : mapping, optional
        Environment variables; those of this process by default. ``LIVERFE_CONFIG_DIR`` names the
        folder outright.

    Returns
    -------
    Path
        ``$XDG_CONFIG_HOME/liverfe`` or ``~/.config/liverfe`` on Linux, ``%APPDATA%\\liverfe`` on
        Windows, ``~/Library/Application Support/liverfe`` on macOS.
    """
    variables = os.environ if environment is None else environment
    if named := variables.get("LIVERFE_CONFIG_DIR"):
        return Path(named).expanduser()
    if sys.platform == "win32":
        roaming = variables.get("APPDATA")
        return (Path(roaming) if roaming else Path.home() / "AppData" / "Roaming") / _FOLDER_NAME
    if sys.platform == "darwin":
        return Path.home() / "Library" / "Application Support" / _FOLDER_NAME
    base = variables.get("XDG_CONFIG_HOME")
    # The base-directory specification asks that a relative path be ignored.
    rooted = base if base and Path(base).is_absolute() else None
    return (Path(rooted) if rooted else Path.home() / ".config") / _FOLDER_NAME
