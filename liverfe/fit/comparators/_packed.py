"""What the comparators' compiled loops share: ragged echoes, and a run over all voxels."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from liverfe.fit.blocks import run_in_blocks
from liverfe.fit.compiled import compiled
from liverfe.fit.rows import DecayRows

Array = NDArray[np.float64]
Array32 = NDArray[np.float32]
Mask = NDArray[np.bool_]
Outcomes = NDArray[np.uint8]


@compiled(error_model="numpy")
def packed(
    signal: Array32, times: Array, usable: Mask, v: int, scale: float, m: Array, t: Array
) -> int:
    """Put the usable echoes of voxel `v` to the front of `m`, divided by `scale`, and of `t`.

    Returns how many there are; 0 where one of them is no magnitude, which fits nothing.
    """
    count = 0
    row = v % len(usable)
    for e in range(len(times)):
        if usable[row, e]:
            value = signal[v, e]
            if not (value >= 0.0 and value < np.inf):
                return 0
            m[count] = value / scale
            t[count] = times[e]
            count += 1
    return count


@compiled(error_model="numpy")
def is_noise(m: Array, used: int, power_limits: Array, first_limit: float) -> bool:
    """Whether the magnitudes, in sigma, are no more than noise, by the rule of the house."""
    power = 0.0
    for e in range(used):
        power += m[e] * m[e]
    noise: bool = power < power_limits[used] and m[0] < first_limit
    return noise


@compiled(error_model="numpy")
def look_up(pieces: Array, u: float) -> tuple[float, float]:
    """Value of a table of `liverfe.fit.tables` at `u`, and its derivative by u."""
    x = u * len(pieces)
    i = min(int(x), len(pieces) - 1)
    r = x - i
    c0, c1, c2, c3 = pieces[i, 0], pieces[i, 1], pieces[i, 2], pieces[i, 3]
    return c0 + r * (c1 + r * (c2 + r * c3)), len(pieces) * (c1 + r * (2.0 * c2 + 3.0 * r * c3))


def fit_each(
    kernel: Callable[..., None],
    signal: Array32,
    echo_times_ms: Array,
    sigma: Array,
    usable: Mask | None,
    *options: object,
) -> DecayRows:
    """Run a compiled loop over all voxels, in blocks and on all cores.

    Parameters
    ----------
    kernel : callable
        ``kernel(signal, times, sigma, usable, *options, rate, s0, outcome)``: the last three are
        written; `sigma` and `usable` have one row for all voxels, or one a voxel.
    signal : ndarray of float32, shape (V, E)
        Magnitudes, signal units.
    echo_times_ms : ndarray of float64, shape (E,)
        Echo times in ms.
    sigma : ndarray of float64, shape (1,) or (V,)
        Noise SD per channel, signal units.
    usable : ndarray of bool, shape (V, E), or None
        Echoes that count; None: all.
    *options : object
        Further arguments of the kernel.

    Returns
    -------
    DecayRows
        R2*, S0 and outcome; standard error and misfit are filled in by `liverfe.fit.fit_rows`.
    """
    rows = DecayRows.empty(len(signal))
    mask = every_echo(signal) if usable is None else usable

    def work(block: slice) -> None:
        kernel(
            signal[block], echo_times_ms, rows_of(sigma, block), rows_of(mask, block), *options,
            rows.r2star_per_s[block], rows.s0[block], rows.outcome[block],
        )  # fmt: skip

    run_in_blocks(work, len(signal))
    return rows


def every_echo(signal: Array32) -> Mask:
    """One row that says of every voxel that all its echoes count."""
    return np.ones((1, signal.shape[1]), dtype=bool)


def rows_of(values: NDArray[Any], block: slice) -> NDArray[Any]:
    """The rows of a block; a single row stands for all."""
    return values if len(values) == 1 else values[block]
