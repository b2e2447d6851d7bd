"""Rows `speed`, `curve-fit` and `memory`: what full maximum likelihood costs beside its peers."""

from __future__ import annotations

import json
import statistics
import subprocess
import sys
import time
import warnings
from collections.abc import Callable
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy import optimize, special

from liverfe.fit import fit_rows
from tests.statistics.cells import Cell, Row, Say, silent
from tests.statistics.machine import load, measure_roofline
from tests.statistics.truth import TWELVE_MS, Array, decay, magnitudes

Fit = Callable[[NDArray[np.float32], Array], object]

MOST_TIMES_LOG_LINEAR = 3.0
LEAST_TIMES_CURVE_FIT = 3000.0
MOST_MEMORY = 1.0
ROOT = Path(__file__).resolve().parents[2]
_PAUSE_S = 0.1
"""After a matrix product its threads look for more work a while, and hold a core meanwhile."""
_STEPS = 3
"""Iterations that the roofline counts: the fewest that reached the maximum from a good start."""


def house(signal: NDArray[np.float32], times_ms: Array) -> object:
    """Full maximum likelihood with standard errors and chi-square, on all cores."""
    return fit_rows(signal, times_ms, np.ones(1), 1)


def voxels(n_voxels: int, rng: np.random.Generator) -> NDArray[np.float32]:
    """Tissue of all kinds: R2* 20 to 1000, SNR 20 to 100, none of it air, in sigma."""
    rate = np.exp(rng.uniform(np.log(20.0), np.log(1000.0), n_voxels))
    snr = np.exp(rng.uniform(np.log(20.0), np.log(100.0), n_voxels))
    return magnitudes(decay(snr, rate, TWELVE_MS), rng)


class LogLinear:
    """NumPy's fastest log-linear fit: one logarithm of everything, one matrix product.

    Its result is new memory, as that of the house's fit is.
    """

    def __init__(self, signal: NDArray[np.float32], times_ms: Array) -> None:
        self.by_echo = np.ascontiguousarray(signal.T)
        t = times_ms * 1e-3
        design = np.stack([np.ones_like(t), -t], axis=1)
        self.solve = np.linalg.pinv(design).astype(np.float32)

    def __call__(self) -> NDArray[np.float32]:
        """Ln S0 and R2* of every voxel, shape (2, V)."""
        return np.asarray(self.solve @ np.log(self.by_echo))

    def in_place(self) -> Callable[[], object]:
        """Make the same fit into memory that is there already: what a second call could save."""
        logs, out = np.empty_like(self.by_echo), np.empty((2, self.by_echo.shape[1]), np.float32)

        def again() -> None:
            np.log(self.by_echo, out=logs)
            np.matmul(self.solve, logs, out=out)

        return again


def measure_speed(
    *, full: bool, fit: Fit = house, say: Say = silent, seed: int = 20_310_407
) -> Row:
    """Time the fit against NumPy's log-linear fit, in turns, and the machine beside both."""
    n_voxels, pairs = (1_000_000, 15) if full else (60_000, 5)
    signal = voxels(n_voxels, np.random.default_rng(seed))
    plain = LogLinear(signal, TWELVE_MS)
    fit(signal[:1000], TWELVE_MS)  # compiles, or loads what was compiled
    ratios, ours, theirs, worked = [], [], [], []
    in_place, reused = plain.in_place(), []
    for k in range(pairs + 1):
        theirs.append(_seconds(plain))
        reused.append(_seconds(in_place))
        time.sleep(_PAUSE_S)
        before = time.process_time()
        ours.append(_seconds(lambda: fit(signal, TWELVE_MS)))
        worked.append(time.process_time() - before)
        ratios.append(ours[-1] / theirs[-1])
        say(f"speed: pair {k} of {pairs}: {ratios[-1]:.2f}")
    roofline = measure_roofline()
    ratio, seconds = statistics.median(ratios[1:]), statistics.median(ours[1:])
    n_echoes = len(TWELVE_MS)
    # Processor time: what others do on the machine meanwhile hardly counts.
    each = 1e9 * statistics.median(worked[1:]) / (n_voxels * n_echoes)
    least = roofline.least_seconds(n_voxels, n_echoes, steps=_STEPS)
    busy = load()
    cell = Cell(
        where=f"{n_voxels} voxels, {n_echoes} echoes, {roofline.cores} cores",
        measured=ratio,
        text=f"{ratio:.2f} x",
        reached=ratio <= MOST_TIMES_LOG_LINEAR,
        note=f"{1e3 * seconds:.0f} ms against {1e3 * statistics.median(theirs[1:]):.0f} ms",
    )
    return Row(
        key="speed",
        what="maximum likelihood, SE and chi2 of a million voxels against NumPy's log-linear fit",
        asked="at most 3 x its time",
        measured=f"{cell.text} ({cell.note})",
        cells=(cell,),
        remarks=(
            f"{1e-6 * n_voxels * n_echoes / seconds:.0f} million echo-voxels a second, "
            f"{each:.1f} ns of one core an echo-voxel",
            f"roofline: copy {roofline.copy_gb_per_s:.1f} GB/s, float32 exp "
            f"{roofline.exp_ns:.2f} ns and log {roofline.log_ns:.2f} ns a core; {_STEPS} "
            f"iterations cannot take less than {1e3 * least:.0f} ms here",
            f"into memory that it owns already NumPy's fit takes "
            f"{1e3 * statistics.median(reused[1:]):.0f} ms",
            f"median of {pairs} pairs, in turns"
            + (f"; load of the machine {busy:.1f}" if busy is not None else ""),
        ),
    )


def _seconds(work: Callable[[], object]) -> float:
    started = time.perf_counter()
    work()
    return time.perf_counter() - started


def measure_curve_fit(
    *, full: bool, fit: Fit = house, say: Say = silent, seed: int = 20_310_408
) -> Row:
    """Time the fit against a `scipy.optimize.curve_fit` loop over some of the same voxels."""
    n_voxels, n_looped, pairs = (1_000_000, 200, 5) if full else (60_000, 20, 3)
    signal = voxels(n_voxels, np.random.default_rng(seed))
    fit(signal[:1000], TWELVE_MS)
    ratios = []
    for k in range(pairs):
        here = signal[k * n_looped : (k + 1) * n_looped].astype(float)
        loop = _seconds(lambda here=here: curve_fit_loop(here, TWELVE_MS)) / n_looped  # type: ignore[misc]
        ratios.append(loop / (_seconds(lambda: fit(signal, TWELVE_MS)) / n_voxels))
        say(f"curve-fit: pair {k + 1} of {pairs}: {ratios[-1]:.0f}")
    ratio = statistics.median(ratios)
    cell = Cell(
        where=f"{n_looped} of {n_voxels} voxels in the loop",
        measured=ratio,
        text=f"{ratio:.0f} x",
        reached=ratio >= LEAST_TIMES_CURVE_FIT,
    )
    return Row(
        key="curve-fit",
        what="the same against a scipy.optimize.curve_fit loop with the first-moment model",
        asked="at least 3000 x faster",
        measured=f"{cell.text} faster",
        cells=(cell,),
        remarks=(f"median of {pairs} pairs, in turns; the loop's time scaled to all voxels",),
    )


def curve_fit_loop(signal: Array, times_ms: Array) -> Array:
    """R2* of each row by `curve_fit` of the expected Rician magnitude (methods sheet 1.1, 2.1)."""
    t = times_ms * 1e-3

    def expected(t: Array, s0: float, rate: float) -> Array:
        a = s0 * np.exp(-rate * t)
        u = a * a / 4.0
        bessel = (1.0 + 2.0 * u) * special.i0e(u) + 2.0 * u * special.i1e(u)
        return np.asarray(np.sqrt(np.pi / 2.0) * bessel)

    found = np.full(len(signal), np.nan)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", optimize.OptimizeWarning)
        for v, m in enumerate(signal):
            try:
                found[v] = optimize.curve_fit(expected, t, m, p0=(1.2 * m[0], 200.0))[0][1]
            except RuntimeError:  # no convergence
                continue
    return found


def measure_memory(*, full: bool, say: Say = silent, copies: int = 0) -> Row:
    """Measure the memory that a fit takes beside its input, in a process of its own.

    `copies` of the input are kept during the fit: the fault that a test plants.
    """
    n_voxels = 4_000_000 if full else 400_000
    probe = [sys.executable, "-m", "tests.statistics.memory", str(n_voxels), str(copies)]
    done = subprocess.run(probe, cwd=ROOT, capture_output=True, text=True, check=True)
    found = json.loads(done.stdout)
    say(f"memory: {found}")
    share = max(found["resident"] or 0.0, found["traced"])
    resident = "not told here" if found["resident"] is None else f"{found['resident']:.2f} x"
    cell = Cell(
        where=f"{n_voxels} voxels, 12 echoes",
        measured=share,
        text=f"{share:.2f} x the input",
        reached=share <= MOST_MEMORY,
        note=f"process {resident}, Python's own count {found['traced']:.2f} x",
    )
    return Row(
        key="memory",
        what="memory beside the input array at the peak of the fit, results included",
        asked="at most 1 x the input",
        measured=f"{cell.text} ({cell.note})",
        cells=(cell,),
        remarks=("in a process of its own, warm; the greater of both counts",),
    )
