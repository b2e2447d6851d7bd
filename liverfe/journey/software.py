"""Which versions of what made a result."""

from __future__ import annotations

import platform
from functools import cache
from importlib.metadata import PackageNotFoundError, version

from liverfe import __version__

_THAT_MOVE_NUMBERS = (
    "numpy",
    "scipy",
    "numba",
    "nibabel",
    "pydicom",
    "python-gdcm",
    "scikit-image",
)
"""Packages through which every number goes; their versions stand in each result."""

_THAT_MAKE_PAGES = ("matplotlib", "typst")
"""Packages that draw the report."""


@cache
def _versions() -> tuple[tuple[str, str], ...]:
    pairs = [("liverfe", __version__), ("python", platform.python_version())]
    for package in (*_THAT_MOVE_NUMBERS, *_THAT_MAKE_PAGES):
        try:
            pairs.append((package, version(package)))
        except PackageNotFoundError:
            # Vendored or frozen without metadata: the result says that it does not know.
            pairs.append((package, "unknown"))
    return tuple(pairs)


def software_versions() -> dict[str, str]:
    """Give the versions that stand in each result and manifest.

    Returns
    -------
    dict of str
        By package; ``liverfe`` and ``python`` first.
    """
    return dict(_versions())
