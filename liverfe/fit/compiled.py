"""`compiled`: kernels are compiled once for each version and kind of processor, and kept on disk.

numba keeps compiled code beside the source, and is followed in where. What its own cache leaves
open is closed here:

- It asks whether the file of a kernel has changed. But functions and constants of other files are
  compiled into a kernel too, and an old one would go on computing with them: here a change of any
  file of this room counts.
- Where no folder can be written it refuses to import. Here the kernel is compiled in each process.
- A full disk, or a file that was cut off, ends the fit. Here such a file counts as not there.
- Index and code are two files, which processes that compile at once can mix up. Here it is one.
"""

from __future__ import annotations

import hashlib
import os
import pickle
import secrets
import sys
from collections.abc import Callable
from contextlib import suppress
from functools import cache
from pathlib import Path
from typing import Any

import llvmlite
import numba
from numba.core.caching import FunctionCache
from numba.core.dispatcher import Dispatcher
from numba.core.serialize import dumps

_N_DIGEST = 32
"""Bytes of SHA-256 before the code itself."""


def compiled(**options: Any) -> Callable[[Callable[..., Any]], Any]:
    """Compile a function on its first call and keep it, in place of ``numba.njit(cache=True)``.

    Parameters
    ----------
    **options
        Those of `numba.njit`, except ``cache``.

    Returns
    -------
    callable
        The decorator.
    """

    def decorate(function: Callable[..., Any]) -> Any:
        kernel = numba.njit(**options)(function)
        # Without the compiler (NUMBA_DISABLE_JIT) it is still the plain function. And numba raises
        # RuntimeError where it knows no folder to write to: then nothing is kept.
        if isinstance(kernel, Dispatcher):
            with suppress(RuntimeError):
                kernel._cache = _KernelCache(function)
        return kernel

    return decorate


@cache
def room_stamp() -> str:
    """Digest of everything that compiled code of this room depends on, beside the processor."""
    digest = hashlib.sha256(f"{numba.__version__} {llvmlite.__version__}".encode())
    room = Path(__file__).parent
    for path in sorted(room.rglob("*.py")):
        digest.update(str(path.relative_to(room)).encode())
        digest.update(hashlib.sha256(path.read_bytes()).digest())
    return digest.hexdigest()


class _KernelCache(FunctionCache):  # type: ignore[misc]  # numba has no types
    """One file for each signature and processor; whatever is wrong with it, it is not there."""

    def load_overload(self, sig: Any, target_context: Any) -> Any:
        """Take compiled code from disk; None where there is none that fits."""
        target_context.refresh()
        with suppress(Exception):
            stored = self._path(sig, target_context.codegen()).read_bytes()
            digest, packed = stored[:_N_DIGEST], memoryview(stored)[_N_DIGEST:]
            if hashlib.sha256(packed).digest() == digest:
                return self._impl.rebuild(target_context, pickle.loads(packed))
        return None

    def save_overload(self, sig: Any, data: Any) -> None:
        """Keep compiled code; if that fails the next process compiles it again."""
        with suppress(Exception):
            if not self._impl.check_cachable(data):
                return
            packed = dumps(self._impl.reduce(data))
            path = self._path(sig, data.codegen)
            path.parent.mkdir(parents=True, exist_ok=True)
            for old in path.parent.glob(f"{self._stem}.*.kernel"):
                if f".{room_stamp()[:16]}." not in old.name:
                    old.unlink()
            part = path.with_suffix(f".{secrets.token_hex(8)}.part")
            try:
                part.write_bytes(hashlib.sha256(packed).digest() + packed)
                os.replace(part, path)
            finally:
                part.unlink(missing_ok=True)

    @property
    def _stem(self) -> str:
        function = self._py_func
        return f"{Path(function.__code__.co_filename).stem}.{function.__name__}"

    def _path(self, sig: Any, codegen: Any) -> Path:
        # The signature by its text, the processor by name and abilities, and the function's code.
        key = hashlib.sha256(repr(self._index_key(sig, codegen)).encode()).hexdigest()
        python = sys.implementation.cache_tag
        name = f"{self._stem}.{python}.{room_stamp()[:16]}.{key[:16]}.kernel"
        return Path(self.cache_path) / name
