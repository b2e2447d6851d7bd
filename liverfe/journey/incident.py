"""An unexpected failure, described so that it can be reported without saying whose data it was."""

from __future__ import annotations

import secrets
import traceback
from pathlib import Path

import liverfe

_PACKAGE_FOLDER = Path(liverfe.__file__).parent


def describe_fault(error: BaseException) -> dict[str, str]:
    """Name the kind and the place of a fault; its message may hold what a header held.

    Parameters
    ----------
    error : BaseException
        As it was caught.

    Returns
    -------
    dict of str
        ``incident`` (8 hex digits), ``kind`` (the exception's class) and ``place`` (our innermost
        file and line).
    """
    place = "an unknown place"
    for frame in traceback.extract_tb(error.__traceback__):
        path = Path(frame.filename)
        if path.is_relative_to(_PACKAGE_FOLDER):
            place = f"{path.relative_to(_PACKAGE_FOLDER.parent).as_posix()}, line {frame.lineno}"
    return {"incident": secrets.token_hex(4), "kind": type(error).__name__, "place": place}
