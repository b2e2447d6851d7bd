"""Row `optimum`: the house's estimate is where SciPy finds the maximum of the exact likelihood."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import optimize

from liverfe.fit import fit_rows
from tests.statistics.cells import Cell, Row, Say, silent, worst
from tests.statistics.theory import (
    bound_per_s,
    log_density,
    log_likelihood,
    score_in_log_amplitude,
)
from tests.statistics.truth import ECHO_SETS_MS, Array, decay, magnitudes

Fit = Callable[[NDArray[np.float32], Array, int], Array]
"""Takes magnitudes in sigma, echo times in ms and channels, gives R2* in 1/s."""

MOST_STANDARD_ERRORS = 1e-3
_WORST_BOUND = 0.20
"""Voxels are drawn where the bound is within this share of R2*: beyond, not all have a maximum."""
_LOST = 1e-3
_GONE = 4.0
"""A voxel without a fit is right if R2* TE1 is this at SciPy's maximum: a decay that is over at the
first echo, as chance has it once in thousands of voxels."""
_FLAT = 1e-5
"""Slope of the log-likelihood per standard error below which the maximum is found to 1e-5 of it."""
_GRID_RATES_PER_S = np.geomspace(3.0, 6000.0, 48)


@dataclass(frozen=True, kw_only=True)
class Voxel:
    """What was drawn for one voxel, and what a standard error is there."""

    signal: NDArray[np.float32]
    echo_set: str
    n: int
    se_per_s: float


def house(signal: NDArray[np.float32], times_ms: Array, n: int) -> Array:
    """The estimator of the house, sigma being known to it."""
    return fit_rows(signal, times_ms, np.ones(1), n).r2star_per_s.astype(np.float64)


def measure_optimum(
    *, full: bool, fit: Fit = house, say: Say = silent, seed: int = 20_310_406
) -> Row:
    """Compare estimates with `scipy.optimize.minimize`, voxel by voxel."""
    wanted = {1: 6000, 4: 1500, 16: 1500, 64: 1000} if full else {1: 80, 4: 20}
    cells = []
    for n, n_voxels in wanted.items():
        voxels = _draw(n_voxels, n, np.random.default_rng([seed, n]))
        found = _fit_by_echo_set(voxels, fit)
        differences = []
        for k, voxel in enumerate(voxels):
            times_ms = ECHO_SETS_MS[voxel.echo_set]
            best = maximise(voxel.signal.astype(float), times_ms, n)
            if np.isfinite(found[k]) or best * times_ms[0] * 1e-3 < _GONE:
                differences.append((found[k] - best) / voxel.se_per_s)
            if k % 500 == 499:
                say(f"optimum: n = {n}: {k + 1} of {n_voxels} voxels")
        cells.append(_cell(n, np.abs(differences)))
    n_all = sum(wanted.values())
    top = worst(cells, lambda cell: cell.measured)
    return Row(
        key="optimum",
        what="distance from the maximum that scipy.optimize.minimize finds, exact likelihood",
        asked="at most 1e-3 standard errors of R2*",
        measured=f"{top.text} at most in {n_all} voxels",
        cells=tuple(cells),
        remarks=("five echo sets, R2* 20 to 1500, SNR 15 to 120, bound within 20 % of R2*",),
    )


def _cell(n: int, distance: Array) -> Cell:
    lost = float((~np.isfinite(distance)).mean())
    furthest = float(np.nanmax(distance)) if lost < 1.0 else float("nan")
    return Cell(
        where=f"n = {n}, {len(distance)} voxels",
        measured=furthest,
        text=f"{furthest:.1e} SE",
        reached=bool(furthest <= MOST_STANDARD_ERRORS and lost <= _LOST),
        note=f"{lost:.2g} of the voxels without a fit" if lost else "",
    )


def _draw(n_voxels: int, n: int, rng: np.random.Generator) -> list[Voxel]:
    voxels: list[Voxel] = []
    names = list(ECHO_SETS_MS)
    while len(voxels) < n_voxels:
        echo_set = names[int(rng.integers(len(names)))]
        times_ms = ECHO_SETS_MS[echo_set]
        rate = float(np.exp(rng.uniform(np.log(20.0), np.log(1500.0))))
        snr = float(np.exp(rng.uniform(np.log(15.0), np.log(120.0))))
        se = bound_per_s(times_ms, rate, snr, n)
        if se <= _WORST_BOUND * rate:
            signal = magnitudes(decay(snr, rate, times_ms), rng, n=n)
            voxels.append(Voxel(signal=signal, echo_set=echo_set, n=n, se_per_s=se))
    return voxels


def _fit_by_echo_set(voxels: list[Voxel], fit: Fit) -> Array:
    found = np.full(len(voxels), np.nan)
    for echo_set, times_ms in ECHO_SETS_MS.items():
        here = [k for k, voxel in enumerate(voxels) if voxel.echo_set == echo_set]
        if here:
            found[here] = fit(np.stack([voxels[k].signal for k in here]), times_ms, voxels[0].n)
    return found


def maximise(m: Array, times_ms: Array, n: int = 1) -> float:
    """R2* at the maximum of the exact likelihood, by BFGS from the best point of a grid.

    Parameters
    ----------
    m : ndarray of float64, shape (E,)
        Magnitudes in sigma.
    times_ms : ndarray of float64, shape (E,)
        Echo times.
    n : int
        Channels.

    Returns
    -------
    float
        In 1/s.
    """
    shapes = decay(np.ones(len(_GRID_RATES_PER_S)), _GRID_RATES_PER_S, times_ms)
    above = np.sqrt(np.maximum(m**2 - (2 * n - 1), 0.0))  # the floor taken off, for a start
    s0 = np.maximum((shapes @ above) / (shapes**2).sum(axis=1), 0.1)
    at = int(np.argmax(log_likelihood(m, s0, _GRID_RATES_PER_S, times_ms, n)))
    t = times_ms * 1e-3
    start = np.array([np.log(s0[at]), _GRID_RATES_PER_S[at]])
    base = float(log_likelihood(m, s0[at], start[1], times_ms, n))
    # Steps in about standard errors, the two parameters untangled: the first step is then no leap.
    a = np.exp(start[0] - start[1] * t)
    design = np.stack([np.ones_like(t), -t], axis=1) * (a * a / np.hypot(1.0, a))[:, None]
    step = np.linalg.inv(np.linalg.cholesky(design.T @ design + np.diag([1e-6, 1e-12]))).T

    def cost(x: Array) -> tuple[float, Array]:
        log_s0, rate = start + step @ x
        a = np.exp(np.clip(log_s0 - rate * t, -30.0, 15.0))
        pull = score_in_log_amplitude(m, a, n)
        value = float(log_density(m, a, n).sum()) - base
        return -value, -step.T @ np.array([pull.sum(), -(t * pull).sum()])

    found = optimize.minimize(cost, np.zeros(2), jac=True, method="BFGS", options={"gtol": 1e-7})
    if np.abs(found.jac).max() > _FLAT:
        # Where the curvature changes much, BFGS stops short or runs off; the simplex needs none.
        begin = found.x if found.fun < 0.0 else np.zeros(2)
        options = {"xatol": 1e-6, "fatol": 1e-14, "maxiter": 2000}
        found = optimize.minimize(
            lambda x: cost(x)[0], begin, method="Nelder-Mead", options=options
        )
    return float((start + step @ found.x)[1])
