"""The least-squares estimators stand at their minimum, and no start can trap them elsewhere."""

from __future__ import annotations

import lmfit
import numpy as np
import pytest
from scipy import optimize, special

from liverfe.fit import ESTIMATORS, FitOutcome
from liverfe.fit.comparators import _first_moment as first_moment_loops
from tests.fit.decays import TWELVE_MS, Array, decay, expected_mean, fit, magnitudes

pytestmark = pytest.mark.slow


@pytest.mark.parametrize("model", ["least-squares", "first-moment"])
@pytest.mark.parametrize("n", [1, 8])
def test_lmfit_finds_the_same_minimum(model: str, n: int) -> None:
    rng = np.random.default_rng(12)
    rates = np.exp(rng.uniform(np.log(20), np.log(700), 15))
    signal = magnitudes(decay(rng.uniform(30, 150, 15), rates, TWELVE_MS), rng, n)
    fitted = fit(signal, TWELVE_MS, n=n, model=model)
    for v, m in enumerate(signal.astype(float)):

        def residual(parameters: lmfit.Parameters, m: Array = m) -> Array:
            a = decay(parameters["s0"].value, parameters["rate"].value, TWELVE_MS)[0]
            return m - (expected_mean(a, n) if model == "first-moment" else a)

        parameters = lmfit.create_params(s0=m[0] * 1.2, rate={"value": rates[v], "min": 0.0})
        result = lmfit.minimize(residual, parameters, xtol=1e-12, ftol=1e-12)
        assert fitted.r2star_per_s[v] == pytest.approx(result.params["rate"].value, rel=2e-5), v
        assert fitted.s0[v] == pytest.approx(result.params["s0"].value, rel=2e-5), v


def test_least_squares_cannot_be_trapped() -> None:
    # Against a fine grid with S0 projected out (methods sheet 2.1), on noise-like voxels too.
    rng = np.random.default_rng(13)
    rates = np.exp(rng.uniform(np.log(10), np.log(3000), 60))
    signal = magnitudes(decay(rng.uniform(1, 20, 60), rates, TWELVE_MS), rng)
    rates = np.concatenate([[0.0], np.geomspace(0.5, 11_900, 4000)])
    shape = decay(np.ones(len(rates)), rates, TWELVE_MS)
    for model in ("least-squares", "second-moment"):
        y = signal.astype(float) if model == "least-squares" else signal.astype(float) ** 2 - 2
        power = 1 if model == "least-squares" else 2
        fitted = fit(signal, TWELVE_MS, model=model)
        resolved = np.flatnonzero(np.isfinite(fitted.r2star_per_s))
        assert len(resolved) > 30
        for v in resolved:
            over = np.maximum(shape**power @ y[v], 0.0)
            best = ((y[v] ** 2).sum() - over**2 / (shape ** (2 * power)).sum(axis=1)).min()
            found = decay(fitted.s0[v], fitted.r2star_per_s[v], TWELVE_MS)[0] ** power
            assert ((y[v] - found) ** 2).sum() <= best * (1 + 1e-6), (model, v)


def test_the_offset_fit_cannot_be_trapped() -> None:
    # A fine grid of rates with S0 and a constant of at least zero solved for at each.
    rng = np.random.default_rng(16)
    signal = magnitudes(decay(rng.uniform(3, 60, 40), rng.uniform(20, 2500, 40), TWELVE_MS), rng)
    fitted = fit(signal, TWELVE_MS, model="offset")
    for v in np.flatnonzero(np.isfinite(fitted.r2star_per_s)):
        m = signal[v].astype(float)

        def cost(rate: float, m: Array = m) -> float:
            shape = np.exp(-1e-3 * rate * TWELVE_MS)
            return optimize.nnls(np.column_stack([shape, np.ones(12)]), m)[1] ** 2

        best = min(cost(rate) for rate in np.geomspace(5.0, 11_900, 250))
        assert cost(float(fitted.r2star_per_s[v])) <= best * (1 + 1e-6), v


TWO_VALLEYS = {
    1: """
4.32 1.52 1.02 1.90 0.63 2.32 2.23 2.29 4.08 1.55 2.06 0.96
3.61 1.31 1.63 2.03 1.05 3.45 0.51 0.69 2.22 0.74 2.79 2.80
3.56 1.37 0.54 3.43 1.01 2.41 1.98 1.03 1.86 1.54 1.19 2.39
4.64 1.37 0.79 2.06 1.86 2.96 2.62 1.62 1.75 1.81 0.95 2.07
4.17 1.52 0.02 1.42 1.05 2.83 0.83 1.82 2.16 1.28 2.70 3.84
5.31 1.30 2.79 2.33 1.93 2.49 3.31 0.60 1.44 0.42 1.60 1.47
3.71 1.32 1.95 1.85 0.25 1.44 1.38 2.18 2.30 2.97 2.34 0.59
6.31 2.32 0.62 3.82 3.61 2.03 1.79 0.08 0.84 1.82 2.68 1.23
""",
    8: """
7.54 4.81 3.58 4.44 3.67 5.13 4.06 5.57 5.00 5.77 4.66 3.65
6.59 4.25 4.00 4.30 4.49 4.44 4.49 5.24 4.72 4.44 4.57 4.44
6.69 4.32 2.99 4.64 5.13 5.08 5.85 4.68 4.58 3.36 4.56 3.94
""",
}
"""Voxels whose sum of squares has two valleys, a slow and a fast decay, found among 60,000
simulated near the noise: a descent from a rate of zero ends in the wrong one."""


@pytest.mark.parametrize("n", [1, 8])
def test_the_first_moment_cannot_be_trapped(n: int) -> None:
    # A fine grid over both parameters, on voxels in which the signal drowns early.
    rng = np.random.default_rng(23)
    snr = rng.uniform(2, 40, 250) * n**0.25
    signal = magnitudes(decay(snr, np.exp(rng.uniform(2, 8, 250)), TWELVE_MS), rng, n)
    hard = np.array(TWO_VALLEYS[n].split(), dtype=np.float32).reshape(-1, 12)
    signal = np.concatenate([signal, hard])
    fitted = fit(signal, TWELVE_MS, n=n, model="first-moment")
    resolved = np.flatnonzero(np.isfinite(fitted.r2star_per_s))
    assert len(resolved) > 150
    assert np.isfinite(fitted.r2star_per_s[250:]).all()
    rates = np.concatenate([[0.0], np.geomspace(1.0, 11_900, 220)])
    first = np.geomspace(0.05, 80.0, 240)  # amplitude at the first echo
    shape = np.exp(-1e-3 * rates[:, None] * (TWELVE_MS - TWELVE_MS[0]))
    means = expected_mean(first[:, None, None] * shape, n)
    for v in resolved:
        m = signal[v].astype(float)
        best = ((m - means) ** 2).sum(axis=-1).min()
        own = expected_mean(decay(fitted.s0[v], fitted.r2star_per_s[v], TWELVE_MS)[0], n)
        assert ((m - own) ** 2).sum() <= best * (1 + 1e-6), v


def test_the_weighted_first_moment_stands_where_its_equations_are_zero() -> None:
    # sum (m - E[m]) E'[m] / xi times the gradient of the amplitude, in closed form for n = 1.
    rng = np.random.default_rng(24)
    rates = np.exp(rng.uniform(np.log(20), np.log(900), 300))
    signal = magnitudes(decay(rng.uniform(15, 100, 300), rates, TWELVE_MS), rng).astype(float)
    fitted = fit(signal, TWELVE_MS, model="weighted-first-moment")
    good = fitted.outcome == FitOutcome.CONVERGED
    assert good.mean() > 0.98
    a = decay(fitted.s0[good], fitted.r2star_per_s[good], TWELVE_MS)
    u = a**2 / 4
    mean = expected_mean(a, 1)
    slope = np.sqrt(np.pi / 2) * (a / 2) * (special.i0e(u) + special.i1e(u))
    variance = 2 + a**2 - mean**2
    gradient = np.stack([a, -1e-3 * TWELVE_MS * a])  # by ln S0, and by R2* in 1/s
    score = (gradient * slope * (signal[good] - mean) / variance).sum(axis=-1)
    weight = slope**2 / variance
    information = np.einsum("pve,qve,ve->vpq", gradient, gradient, weight)
    step = np.linalg.solve(information, score.T[..., None])[..., 0]
    se = np.sqrt(np.linalg.inv(information)[:, 1, 1])
    assert np.abs(step[:, 1] / se).max() < 1e-3


def test_log_linear_is_numpys_straight_line() -> None:
    rng = np.random.default_rng(14)
    signal = magnitudes(decay(np.full(20, 60), 120, TWELVE_MS), rng)
    plain = fit(signal, TWELVE_MS, model="log-linear")
    weighted = fit(signal, TWELVE_MS, model="weighted-log-linear")
    iterated = fit(signal, TWELVE_MS, model="iterated-log-linear")
    for v, m in enumerate(signal.astype(float)):
        line = np.polyfit(TWELVE_MS, np.log(m), 1)
        assert plain.r2star_per_s[v] == pytest.approx(-1e3 * line[0], rel=1e-5)
        assert plain.s0[v] == pytest.approx(np.exp(line[1]), rel=1e-5)
        line = np.polyfit(TWELVE_MS, np.log(m), 1, w=m)  # polyfit squares its weights
        assert weighted.r2star_per_s[v] == pytest.approx(-1e3 * line[0], rel=1e-5)
        # The iterated line is the one that its own fit weighs.
        own = decay(iterated.s0[v], iterated.r2star_per_s[v], TWELVE_MS)[0]
        line = np.polyfit(TWELVE_MS, np.log(m), 1, w=own)
        assert iterated.r2star_per_s[v] == pytest.approx(-1e3 * line[0], rel=1e-5)
        assert iterated.s0[v] == pytest.approx(np.exp(line[1]), rel=1e-5)


def test_a_descent_that_runs_out_of_steps_gives_a_status_and_no_number(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    # Uncompiled, because compiled code has its constants built in.
    for name in ("_descend", "_best_of_all_starts"):
        monkeypatch.setattr(first_moment_loops, name, getattr(first_moment_loops, name).py_func)
    monkeypatch.setattr(
        first_moment_loops, "fit_first_moments", first_moment_loops.fit_first_moments.py_func
    )
    rng = np.random.default_rng(26)
    signal = magnitudes(decay([80.0, 80.0], [60.0, 400.0], TWELVE_MS), rng)
    for steps, outcome in ((100, FitOutcome.CONVERGED), (2, FitOutcome.NOT_CONVERGED)):
        monkeypatch.setattr(first_moment_loops, "_MOST_STEPS", steps)
        for model in ("first-moment", "weighted-first-moment"):
            fitted = fit(signal, TWELVE_MS, model=model)
            assert (fitted.outcome == outcome).all(), (model, steps)
            assert (np.isnan(fitted.r2star_per_s) == (steps == 2)).all()


@pytest.mark.parametrize("model", ESTIMATORS)
def test_what_did_not_converge_has_no_number(model: str) -> None:
    rng = np.random.default_rng(25)
    rates = np.exp(rng.uniform(np.log(5), np.log(5000), 3000))
    signal = magnitudes(decay(rng.uniform(0, 30, 3000), rates, TWELVE_MS), rng)
    fitted = fit(signal, TWELVE_MS, model=model)
    shown = np.isin(fitted.outcome, (FitOutcome.CONVERGED, FitOutcome.AT_LOWER_BOUND))
    assert (np.isfinite(fitted.r2star_per_s) == shown).all()
    assert (np.isfinite(fitted.s0) == shown).all()
    # A status in place of a number is for the odd voxel, not a way out.
    assert (fitted.outcome == FitOutcome.NOT_CONVERGED).mean() < 2e-3
    assert shown.mean() > 0.4
