"""`compiled`: kernels are compiled once for each version and kind of processor, and kept.

numba keeps compiled code in a folder of its choice, and goes on doing so. What its own way leaves
open is closed here:

- It asks whether the file of a kernel has changed. But functions and constants of other files are
  compiled into a kernel too, and an old one would go on computing with them: here a change of any
  file of this room counts.
- Where no folder can be written it refuses to import. Here the kernel is compiled in each process.
- A full disk, or a file that was cut off, ends the fit. Here such a file counts as not there.
- It keeps an index beside the code, and processes that compile at once can mix the two up. Here
  code says itself what it is, and is believed only if that fits, to the last bit.
"""

from __future__ import annotations

import hashlib
import importlib.resources
import pickle
from collections.abc import Callable, Iterator
from contextlib import suppress
from functools import cache
from importlib.resources.abc import Traversable
from typing import Any

import numba
import numpy as np
from numba.core.caching import CompileResultCacheImpl, FunctionCache
from numba.core.dispatcher import Dispatcher
from numba.core.serialize import dumps
from numba.core.sigutils import normalize_signature
from numpy.typing import NDArray

_ROOM = "liverfe.fit"


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
                kernel._cache = _KernelCache(function)  # type: ignore[attr-defined]
        return kernel

    return decorate


def as_argument(array: NDArray[Any]) -> NDArray[Any]:
    """Give an array as the kernels take it: row after row, and locked.

    A kernel is compiled for each kind of array that it meets, which takes seconds: so it meets one.
    """
    view = np.ascontiguousarray(array).view()
    view.flags.writeable = False
    return view


@cache
def room_stamp() -> str:
    """Digest of everything that compiled code of this room depends on, beside the processor."""
    digest = hashlib.sha256(numba.__version__.encode())
    for name, content in sorted(_sources(importlib.resources.files(_ROOM))):
        digest.update(f"{name} {hashlib.sha256(content).hexdigest()}\n".encode())
    return digest.hexdigest()


def _sources(folder: Traversable, above: str = "") -> Iterator[tuple[str, bytes]]:
    for entry in folder.iterdir():
        if entry.is_dir():
            yield from _sources(entry, f"{above}{entry.name}/")
        elif entry.name.endswith(".py"):
            yield above + entry.name, entry.read_bytes()


class _Sealed(CompileResultCacheImpl):
    """Puts a seal on compiled code: what it was made from and for, and a digest of its bytes."""

    def reduce(self, cres: Any) -> Any:
        """Pack compiled code with its seal."""
        packed = dumps(super().reduce(cres))
        return _origin(cres.library.codegen), hashlib.sha256(packed).digest(), packed

    def rebuild(self, target_context: Any, payload: Any) -> Any:
        """Unpack compiled code, or raise where its seal does not fit."""
        origin, digest, packed = payload
        if origin != _origin(target_context.codegen()):
            raise ValueError("compiled from other sources or for another processor")
        if digest != hashlib.sha256(packed).digest():
            raise ValueError("damaged")
        return super().rebuild(target_context, pickle.loads(packed))


def _origin(codegen: Any) -> tuple[Any, ...]:
    return room_stamp(), *codegen.magic_tuple()


class _KernelCache(FunctionCache):
    """Whatever is wrong with what is kept, it is not there, and is kept anew."""

    _impl_class = _Sealed

    def load_overload(self, sig: Any, target_context: Any) -> Any:
        """Take compiled code; None where there is none that fits."""
        with suppress(Exception):  # a damaged file raises many kinds; all mean the same here
            found = super().load_overload(sig, target_context)
            if found is None or tuple(found.signature.args) == tuple(normalize_signature(sig)[0]):
                return found
        with suppress(Exception):
            self.flush()
        return None

    def save_overload(self, sig: Any, data: Any) -> None:
        """Keep compiled code; where that fails the next process compiles it again."""
        with suppress(Exception):
            super().save_overload(sig, data)
