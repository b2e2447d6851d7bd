"""What every comparator's fit is judged by: bound, misfit, and whether it decays at all.

The comparators give no standard error of their own: the Cramér-Rao bound at their fit stands in,
their true scatter is not smaller. Misfit and bound are those of the house (`liverfe.fit.bounds`),
so that maps of two estimators can be held against each other.
"""

from __future__ import annotations

import numpy as np

from liverfe.fit.blocks import run_in_blocks
from liverfe.fit.comparators._packed import (
    Array,
    Array32,
    Mask,
    Outcomes,
    every_echo,
    look_up,
    packed,
    rows_of,
)
from liverfe.fit.compiled import compiled
from liverfe.fit.decay import FitOutcome
from liverfe.fit.rows import DecayRows
from liverfe.fit.tables import signal_tables

_AT_LOWER = int(FitOutcome.AT_LOWER_BOUND)


@compiled(nogil=True, error_model="numpy")
def _judge_rows(
    signal: Array32, times: Array, sigma: Array, usable: Mask, n: int,
    excess: Array, information: Array, amplitude_scale: float,
    rate_in: Array32, s0_in: Array32, se_out: Array32, chi2_out: Array32, outcome_out: Outcomes,
) -> None:  # fmt: skip
    n_echoes = signal.shape[1]
    m, t = np.empty(n_echoes), np.empty(n_echoes)
    for v in range(len(signal)):
        if not (np.isfinite(rate_in[v]) and s0_in[v] > 0.0):
            continue
        if rate_in[v] <= 0.0:
            outcome_out[v] = _AT_LOWER
        scale = sigma[v % len(sigma)]
        used = packed(signal, times, usable, v, scale, m, t)
        rate = 1e-3 * max(rate_in[v], 0.0)
        f00 = f01 = f11 = misfit = 0.0
        for e in range(used):
            a = s0_in[v] / scale * np.exp(-rate * t[e])
            u = a / (a + amplitude_scale)
            d, _ = look_up(excess, u)
            misfit += (m[e] - a - d) ** 2 / (2.0 * n - d * d - 2.0 * a * d)
            weight = a * a * look_up(information, u)[0]
            f00 += weight
            f01 += t[e] * weight
            f11 += t[e] * t[e] * weight
        det = f00 * f11 - f01 * f01
        resolvable = det > 1e-14 * f00 * f11
        se_out[v] = 1e3 * np.sqrt(f00 / det) if resolvable else np.inf
        if used > 2:
            chi2_out[v] = misfit / (used - 2)


def judge_like_the_house(
    rows: DecayRows,
    signal: Array32,
    echo_times_ms: Array,
    sigma: Array,
    n: int,
    usable: Mask | None,
) -> None:
    """Fill in bound and misfit of each fitted voxel, and mark decays that are none."""
    tables = signal_tables(n)
    mask = every_echo(signal) if usable is None else usable

    def work(block: slice) -> None:
        _judge_rows(
            signal[block], echo_times_ms, rows_of(sigma, block), rows_of(mask, block), n,
            tables.excess, tables.information, tables.amplitude_scale,
            rows.r2star_per_s[block], rows.s0[block],
            rows.r2star_se_per_s[block], rows.reduced_chi2[block], rows.outcome[block],
        )  # fmt: skip

    run_in_blocks(work, len(signal))
