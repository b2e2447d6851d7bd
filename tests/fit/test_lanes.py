"""Sixteen voxels at a time: the same fits as one by one in double precision, wherever they lie."""

from __future__ import annotations

import numpy as np
import pytest
from numba import njit

from liverfe.fit import FitOutcome, fit_decays, mono_exponential
from liverfe.fit.lane_functions import exp, rough_log
from liverfe.fit.lane_kernels import LEFT_TO_ENGINE
from liverfe.fit.lanes import WIDTH, load, store
from liverfe.fit.rician import fit_rician_ml
from tests.fit.decays import PROTOCOLS_MS, SIGMA_ONE, TWELVE_MS, decay, magnitudes

N_VOXELS = 2500


def voxels(times: np.ndarray, n: int, seed: int, *, dimmest: float = 8.0) -> np.ndarray:
    """Decays of every kind between none and faster than any echo, SNR up to 450."""
    rng = np.random.default_rng(seed)
    snr = np.exp(rng.uniform(np.log(dimmest), np.log(450), N_VOXELS))
    rate = np.exp(rng.uniform(np.log(3), np.log(3000), N_VOXELS))
    return magnitudes(decay(snr, rate, times), rng, n)


@pytest.mark.parametrize("n", [1, 2, 8, 32, 64])
@pytest.mark.parametrize("protocol", PROTOCOLS_MS)
def test_lanes_and_engine_climb_to_the_same_point(protocol: str, n: int) -> None:
    # The engine is held against SciPy's optimiser (test_engine.py).
    times = PROTOCOLS_MS[protocol]
    signal = voxels(times, n, seed=n)
    lanes = fit_rician_ml(signal, times, SIGMA_ONE, n)
    engine = fit_decays(signal, mono_exponential(times), SIGMA_ONE, n)
    both = (lanes.outcome == FitOutcome.CONVERGED) & (engine.outcome == FitOutcome.CONVERGED)
    assert both.mean() > 0.6
    se = engine.standard_errors[both, 1]
    apart = np.abs(lanes.r2star_per_s[both] - engine.parameters[both, 1]) / se
    assert apart.max() < 1e-3
    assert lanes.r2star_se_per_s[both] == pytest.approx(se, rel=2e-3)
    assert lanes.reduced_chi2[both] == pytest.approx(engine.reduced_chi2[both], rel=3e-3, abs=3e-3)
    # Where only one of them settled, the decay is past anything that this scan shows.
    differ = lanes.outcome != engine.outcome
    assert differ.mean() < 0.002
    assert (engine.standard_errors[differ, 1] > 0.3 * engine.parameters[differ, 1]).all()


@njit
def through_lanes(x: np.ndarray, exponentials: np.ndarray, logarithms: np.ndarray) -> None:
    for place in range(0, len(x), WIDTH):
        store(exponentials, place, exp(load(x, place)))
        store(logarithms, place, rough_log(load(exponentials, place)))


def test_exponential_and_logarithm_are_numpys() -> None:
    x = np.linspace(-29.9, 39.9, 16 * 500, dtype=np.float32)
    exponentials, logarithms = np.empty_like(x), np.empty_like(x)
    through_lanes(x, exponentials, logarithms)
    assert exponentials == pytest.approx(np.exp(x.astype(float)), rel=2.5e-7)
    assert logarithms == pytest.approx(x, abs=1.5e-4)
    # What is as good as nothing is still a normal number, and so is its square.
    through_lanes(np.full(16, -1e9, np.float32), exponentials, logarithms)
    assert exponentials[0] == pytest.approx(np.exp(-30), rel=1e-6)


def test_nearly_all_voxels_are_settled_in_their_lanes(monkeypatch: pytest.MonkeyPatch) -> None:
    # Else the speed is gone: the engine takes a hundred times as long.
    left = []

    def count(signal: np.ndarray, model: object, sigma: object, n: int, **which: np.ndarray):
        left.append(len(which["rows"]))
        return fit_decays(signal, model, sigma, n, **which)  # type: ignore[arg-type]

    monkeypatch.setattr("liverfe.fit.rician.fit_decays", count)
    signal = voxels(TWELVE_MS, 1, seed=3, dimmest=20.0)
    fit_rician_ml(signal, TWELVE_MS, SIGMA_ONE, 1)
    assert sum(left) < 0.01 * N_VOXELS


@pytest.mark.parametrize("size", [1, 2, 15, 16, 17, 33, 500])
def test_a_voxel_comes_out_the_same_to_the_bit_whatever_lies_beside_it(size: int) -> None:
    signal = voxels(TWELVE_MS, 1, seed=7)[:500]
    whole = fit_rician_ml(signal, TWELVE_MS, SIGMA_ONE, 1)
    order = np.random.default_rng(size).permutation(500)
    for start in range(0, 500, size):
        some = order[start : start + size]
        part = fit_rician_ml(signal[some], TWELVE_MS, SIGMA_ONE, 1)
        for name in ("r2star_per_s", "s0", "r2star_se_per_s", "reduced_chi2", "outcome"):
            np.testing.assert_array_equal(getattr(part, name), getattr(whole, name)[some])


def test_memory_order_of_the_images_changes_no_bit() -> None:
    signal = voxels(TWELVE_MS, 1, seed=8)
    by_voxel = fit_rician_ml(signal, TWELVE_MS, SIGMA_ONE, 1)
    by_echo = fit_rician_ml(np.ascontiguousarray(signal.T).T, TWELVE_MS, SIGMA_ONE, 1)
    np.testing.assert_array_equal(by_voxel.r2star_per_s, by_echo.r2star_per_s)
    np.testing.assert_array_equal(by_voxel.outcome, by_echo.outcome)


def test_sigma_of_each_voxel_is_its_own() -> None:
    signal = voxels(TWELVE_MS, 1, seed=9)
    one = fit_rician_ml(signal, TWELVE_MS, SIGMA_ONE, 1)
    factor = 2.0 ** np.random.default_rng(9).integers(-8, 9, N_VOXELS)
    each = fit_rician_ml(signal * factor[:, None].astype(np.float32), TWELVE_MS, factor, 1)
    np.testing.assert_array_equal(one.r2star_per_s, each.r2star_per_s)
    np.testing.assert_array_equal(one.s0 * factor.astype(np.float32), each.s0)


def test_what_single_precision_cannot_resolve_goes_to_the_engine() -> None:
    # SNR 20,000: R2* is known to 2e-6 of itself, float32 images and all.
    rng = np.random.default_rng(10)
    signal = magnitudes(decay(np.full(200, 2e4), 300.0, TWELVE_MS), rng)
    fitted = fit_rician_ml(signal, TWELVE_MS, SIGMA_ONE, 1)
    engine = fit_decays(signal, mono_exponential(TWELVE_MS), SIGMA_ONE, 1)
    np.testing.assert_array_equal(fitted.r2star_per_s, engine.parameters[:, 1].astype(np.float32))


def test_no_row_keeps_a_sign_of_the_way_it_was_fitted() -> None:
    for n in (1, 16):
        outcome = fit_rician_ml(voxels(TWELVE_MS, n, seed=11), TWELVE_MS, SIGMA_ONE, n).outcome
        assert outcome.max() < 6 < LEFT_TO_ENGINE


def test_values_that_are_no_magnitude_are_not_fitted() -> None:
    signal = np.tile(decay(50.0, 100.0, TWELVE_MS), (20, 1)).astype(np.float32)
    signal[3, 4], signal[5, 0], signal[7, 11] = np.nan, -1.0, np.inf
    fitted = fit_rician_ml(signal, TWELVE_MS, SIGMA_ONE, 1)
    bad = np.zeros(20, dtype=bool)
    bad[[3, 5, 7]] = True
    assert (fitted.outcome[bad] == FitOutcome.NOT_FITTED).all()
    assert np.isnan(fitted.r2star_per_s[bad]).all()
    assert np.isnan(fitted.s0[bad]).all()
    assert fitted.r2star_per_s[~bad] == pytest.approx(np.full(17, 100.0), rel=0.01)
