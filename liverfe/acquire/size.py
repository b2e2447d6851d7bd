"""A budget of size, asked before anything is allocated."""

from __future__ import annotations

from collections.abc import Iterator

from liverfe.errors import Finding

LARGEST_BYTES = 2 * 1024**3
"""A stack of float32; a liver study is below 0.1 GiB. A greater one is broken or crafted."""


def check_size(shape: tuple[int, int, int], n_echoes: int, *, where: str) -> Iterator[Finding]:
    """Yield ``too-large`` where the stack would not fit the budget."""
    n_bytes = 4 * shape[0] * shape[1] * shape[2] * n_echoes
    if n_bytes > LARGEST_BYTES:
        yield Finding.of(
            "too-large",
            where=where,
            shape=" x ".join(str(size) for size in (*shape, n_echoes)),
            n_gib=f"{n_bytes / 1024**3:.1f}",
            most_gib=f"{LARGEST_BYTES / 1024**3:g}",
        )
