"""Echoes that do not count, noise that varies, bounds and memory: the same for all estimators."""

from __future__ import annotations

import tracemalloc

import numpy as np
import pytest

from liverfe.fit import (
    ESTIMATORS,
    DecayRows,
    FitOutcome,
    expected_magnitude,
    fit_rows,
    magnitude_variance,
    r2star_bound_per_s,
)
from tests.fit.decays import SIGMA_ONE, TWELVE_MS, decay, fit, magnitudes

pytestmark = pytest.mark.slow

FIELDS = ("r2star_per_s", "s0", "r2star_se_per_s", "reduced_chi2", "outcome")
COMPARATORS = ESTIMATORS[1:]
NEEDS_THREE = ("offset", "autoregressive")


def some_signal(n_voxels: int, seed: int, n: int = 1) -> np.ndarray:
    rng = np.random.default_rng(seed)
    rates = np.exp(rng.uniform(np.log(15), np.log(1200), n_voxels))
    return magnitudes(decay(rng.uniform(20, 120, n_voxels), rates, TWELVE_MS), rng, n)


def assert_same(one: DecayRows, other: DecayRows, model: str) -> None:
    for name in FIELDS:
        found, wanted = getattr(one, name), getattr(other, name)
        if model == "rician-ml" and name != "outcome":
            # Ragged voxels go another way to the same maximum, whole ones in single precision.
            np.testing.assert_allclose(found, wanted, rtol=2e-3, err_msg=name)
        else:
            np.testing.assert_array_equal(found, wanted, err_msg=name)


@pytest.mark.parametrize("model", ESTIMATORS)
def test_an_echo_that_does_not_count_is_as_if_it_had_not_been_taken(model: str) -> None:
    signal = some_signal(300, seed=51)
    spoilt = signal.copy()
    spoilt[:, 3], spoilt[:, 8] = np.nan, 1e6
    usable = np.ones(signal.shape, dtype=bool)
    usable[:, [3, 8]] = False
    kept = np.flatnonzero(usable[0])
    whole = fit(signal[:, kept], TWELVE_MS[kept], model=model)
    assert (whole.outcome == FitOutcome.CONVERGED).mean() > 0.9
    assert_same(fit(spoilt, TWELVE_MS, model=model, usable=usable), whole, model)


@pytest.mark.parametrize("model", COMPARATORS)
def test_each_voxel_has_echoes_of_its_own(model: str) -> None:
    signal = some_signal(200, seed=52)
    rng = np.random.default_rng(53)
    usable = rng.random(signal.shape) < 0.7
    usable[:, 0] |= rng.random(len(signal)) < 0.5
    ragged = fit(signal, TWELVE_MS, model=model, usable=usable)
    for v in range(len(signal)):
        kept = np.flatnonzero(usable[v])
        alone = fit(signal[v, kept], TWELVE_MS[kept], model=model)
        for name in FIELDS:
            np.testing.assert_array_equal(getattr(ragged, name)[v], getattr(alone, name)[0])


@pytest.mark.parametrize("model", ESTIMATORS)
def test_fewer_echoes_than_it_needs_are_not_fitted(model: str) -> None:
    signal = np.repeat(decay(1e4, 80.0, TWELVE_MS), 4, axis=0)
    usable = np.zeros(signal.shape, dtype=bool)
    for count in range(4):
        usable[count, 1 : 1 + count] = True
    fitted = fit(signal, TWELVE_MS, model=model, usable=usable)
    needed = 3 if model in NEEDS_THREE else 2
    assert (fitted.outcome[:needed] == FitOutcome.NOT_FITTED).all()
    assert np.isnan(fitted.r2star_per_s[:needed]).all()
    assert fitted.r2star_per_s[needed:] == pytest.approx(80.0, rel=1e-3)
    # With two echoes nothing is left to hold the model against.
    assert np.isfinite(fitted.reduced_chi2).tolist() == [False, False, False, True]


@pytest.mark.parametrize("model", ESTIMATORS)
@pytest.mark.parametrize("wrong", [np.nan, np.inf, -1.0])
def test_what_is_no_magnitude_is_not_fitted(model: str, wrong: float) -> None:
    signal = some_signal(3, seed=54)
    signal[1, 6] = wrong
    fitted = fit(signal, TWELVE_MS, model=model)
    assert fitted.outcome[1] == FitOutcome.NOT_FITTED
    assert np.isnan(fitted.r2star_per_s).tolist() == [False, True, False]


@pytest.mark.parametrize("model", COMPARATORS)
def test_each_voxel_is_fitted_at_its_own_noise(model: str) -> None:
    signal = some_signal(400, seed=55)
    sigma = np.where(np.arange(400) % 2 == 0, 1.0, 3.0)
    signal *= sigma[:, None].astype(np.float32)
    mixed = fit(signal, TWELVE_MS, sigma=sigma, model=model)
    for parity in (0, 1):
        own = fit(signal[parity::2], TWELVE_MS, sigma=[1.0, 3.0][parity], model=model)
        for name in FIELDS:
            np.testing.assert_array_equal(getattr(mixed, name)[parity::2], getattr(own, name))


@pytest.mark.parametrize(
    "model", ["truncation", "predicted-truncation", "second-moment", "first-moment"]
)
def test_a_sigma_that_varies_is_not_replaced_by_its_median(model: str) -> None:
    # True decays under noise of 1 and 8 units; a median of 1 for all would read the noise floor of
    # the second half as signal and its R2* a third too low.
    rng = np.random.default_rng(56)
    sigma = np.repeat([1.0, 8.0], [600, 400])
    amplitude = decay(30.0 * sigma, 450.0, TWELVE_MS) / sigma[:, None]
    signal = magnitudes(amplitude, rng) * sigma[:, None]
    fitted = fit(signal, TWELVE_MS, sigma=sigma, model=model)
    quiet, loud = np.median(fitted.r2star_per_s[:600]), np.median(fitted.r2star_per_s[600:])
    assert loud == pytest.approx(quiet, rel=0.04)
    assert loud == pytest.approx(450.0, rel=0.08)


@pytest.mark.parametrize("model", ["first-moment", "weighted-first-moment", "second-moment"])
def test_noise_alone_has_no_signal_for_those_that_know_the_noise(model: str) -> None:
    # The stated chance of taking noise for signal: 1e-3 by all echoes, 1e-4 by the first.
    rng = np.random.default_rng(57)
    for n in (1, 64):
        fitted = fit(magnitudes(np.zeros((20_000, 12)), rng, n), TWELVE_MS, n=n, model=model)
        assert 2e-4 < (fitted.outcome != FitOutcome.NO_SIGNAL).mean() < 2e-3


@pytest.mark.parametrize("model", COMPARATORS)
@pytest.mark.parametrize("n", [1, 16, 64])
def test_bound_and_misfit_are_those_of_the_fit(model: str, n: int) -> None:
    signal = some_signal(60, seed=58, n=n)
    fitted = fit(signal, TWELVE_MS, n=n, model=model)
    good = fitted.outcome == FitOutcome.CONVERGED
    assert good.mean() > 0.8
    rate, s0 = fitted.r2star_per_s[good].astype(float), fitted.s0[good].astype(float)
    bound = r2star_bound_per_s(TWELVE_MS, rate, s0, 1.0, n=n)
    assert fitted.r2star_se_per_s[good] == pytest.approx(bound, rel=1e-4)
    a = decay(s0, rate, TWELVE_MS)
    misfit = (signal[good] - expected_magnitude(a, n)) ** 2 / magnitude_variance(a, n)
    assert fitted.reduced_chi2[good] == pytest.approx(misfit.sum(axis=1) / 10, rel=1e-4, abs=1e-6)


def test_comparison_fits_carry_misfit_and_bound_of_their_own_result() -> None:
    signal = magnitudes(decay(np.full(4000, 80), 100, TWELVE_MS), np.random.default_rng(15))
    house = fit(signal, TWELVE_MS)
    other = fit(signal, TWELVE_MS, model="first-moment")
    # Same model, nearly the same fit: the same misfit and bound as the house's, to a percent.
    assert other.reduced_chi2.mean() == pytest.approx(house.reduced_chi2.mean(), rel=0.01)
    assert np.median(other.r2star_se_per_s) == pytest.approx(
        np.median(house.r2star_se_per_s), rel=0.01
    )


def test_a_bound_too_large_to_store_is_infinite_and_silent() -> None:
    # Warnings are errors here: a huge standard error once overflowed with one.
    signal = np.array([[3.0, 0.001, 0.001, 0.001]])
    fitted = fit(signal, [1.0, 1.8, 2.6, 3.4], sigma=SIGMA_ONE * 1e3, model="least-squares")
    assert not np.isfinite(fitted.r2star_se_per_s[0])
    assert fitted.outcome[0] in set(FitOutcome)


def test_echoes_of_another_shape_are_refused() -> None:
    signal = some_signal(4, seed=59)
    with pytest.raises(ValueError, match=r"usable has shape \(4, 11\), not \(4, 12\)"):
        fit_rows(signal, TWELVE_MS, SIGMA_ONE, 1, usable=np.ones((4, 11), dtype=bool))


@pytest.mark.parametrize("model", ESTIMATORS)
def test_no_estimator_needs_as_much_memory_again_as_its_input(model: str) -> None:
    # Issue of the estimator: extra memory at most the input array, the result counted in.
    signal = np.repeat(some_signal(1000, seed=60), 150, axis=0)
    fit_rows(signal[:10], TWELVE_MS, SIGMA_ONE, 1, model=model)  # compile first
    tracemalloc.start()
    try:
        fit_rows(signal, TWELVE_MS, SIGMA_ONE, 1, model=model)
        _, peak = tracemalloc.get_traced_memory()
    finally:
        tracemalloc.stop()
    assert peak < signal.nbytes
