"""What the fit says of voxels that are no decay: an outcome, never a number that looks right."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.echoes import EchoStack
from liverfe.fit import ESTIMATORS, DecayFit, DecayRows, FitOutcome, fit_r2star
from liverfe.grid import Grid
from liverfe.noise import NoiseLevel
from tests.fit.decays import TWELVE_MS, decay, fit, magnitudes

GOOD = decay(100.0, 80.0, TWELVE_MS)[0]


def says_nothing(rows: DecayRows) -> bool:
    values = (rows.r2star_per_s, rows.s0, rows.r2star_se_per_s, rows.reduced_chi2)
    return all(np.isnan(value).all() for value in values)


@pytest.mark.parametrize("wrong", [np.nan, np.inf, -np.inf, -1.0])
@pytest.mark.parametrize("echo", [0, 5, 11])
def test_a_value_that_is_no_magnitude_is_not_fitted(wrong: float, echo: int) -> None:
    signal = GOOD.copy()
    signal[echo] = wrong
    fitted = fit([signal, GOOD], TWELVE_MS)
    assert fitted.outcome.tolist() == [FitOutcome.NOT_FITTED, FitOutcome.CONVERGED]
    assert np.isnan(fitted.r2star_per_s[0])
    assert fitted.r2star_per_s[1] == pytest.approx(80.0, rel=0.01)


@pytest.mark.parametrize("n", [1, 16])
def test_noise_alone_has_no_signal(n: int) -> None:
    # The stated chance of taking noise for signal: 1e-3 by all echoes, 1e-4 by the first.
    rng = np.random.default_rng(31)
    fitted = fit(magnitudes(np.zeros((20_000, 12)), rng, n), TWELVE_MS, n=n)
    taken = (fitted.outcome != FitOutcome.NO_SIGNAL).mean()
    assert 2e-4 < taken < 2e-3
    assert says_nothing(fit(np.zeros(12), TWELVE_MS, n=n))


def test_a_constant_signal_is_at_the_lower_bound_with_its_own_s0() -> None:
    fitted = fit(np.full(12, 100.0), TWELVE_MS)
    assert fitted.outcome[0] == FitOutcome.AT_LOWER_BOUND
    assert fitted.r2star_per_s[0] == 0.0
    # A constant 100 sigma is sqrt(A² + 1) to first order (Gudbjartsson 1995): A = 99.995.
    assert fitted.s0[0] == pytest.approx(99.995, abs=1e-3)


def test_a_rising_signal_is_at_the_lower_bound() -> None:
    fitted = fit(GOOD[::-1], TWELVE_MS)
    assert fitted.outcome[0] == FitOutcome.AT_LOWER_BOUND
    assert fitted.r2star_per_s[0] == 0.0


def test_a_decay_that_is_gone_at_the_second_echo_is_never_read_as_slow() -> None:
    rng = np.random.default_rng(32)
    amplitude = np.zeros((4000, 12))
    amplitude[:, 0] = 40.0
    fitted = fit(magnitudes(amplitude, rng), TWELVE_MS)
    # 40 sigma at 1.0 ms that were still 3.5 sigma at 1.8 ms would be 3045 /s.
    fast = (fitted.outcome == FitOutcome.AT_UPPER_BOUND) | (fitted.r2star_per_s > 3045)
    assert fast.mean() > 0.995
    assert np.isnan(fitted.r2star_per_s[fitted.outcome == FitOutcome.AT_UPPER_BOUND]).all()
    slow = fitted.r2star_per_s[~fast]
    assert (slow > 2000).all()


def test_one_echo_above_the_noise_is_a_decay_and_no_absence() -> None:
    # 5 sigma in noise has a chance of exp(-12.5), 4e-6 (Rayleigh); the twelve echoes together are
    # quite likely noise (chi-square of 24 degrees: 40.8, one in 60).
    fitted = fit([5.0] + [1.2] * 11, TWELVE_MS)
    assert fitted.outcome[0] not in (FitOutcome.NO_SIGNAL, FitOutcome.NOT_FITTED)
    assert fit([4.0] + [1.2] * 11, TWELVE_MS).outcome[0] == FitOutcome.NO_SIGNAL


def test_slow_decays_are_never_said_to_be_over_the_limit() -> None:
    rng = np.random.default_rng(33)
    for snr in (10.0, 30.0):
        signal = magnitudes(decay(np.full(5000, snr), 60.0, TWELVE_MS), rng)
        assert not (fit(signal, TWELVE_MS).outcome == FitOutcome.AT_UPPER_BOUND).any()


def stack_of(magnitude: np.ndarray, present: np.ndarray | None = None) -> EchoStack:
    grid = Grid(shape=magnitude.shape[:3], affine_mm=np.eye(4))
    return EchoStack(magnitude=magnitude, echo_times_ms=TWELVE_MS, grid=grid, present=present)


def known(sigma: float, sigma_map: np.ndarray | None = None) -> NoiseLevel:
    return NoiseLevel(
        sigma=sigma, n_channels=1, method="given", relative_sd=0.0, sigma_map=sigma_map
    )


@pytest.mark.parametrize("estimator", ESTIMATORS)
def test_every_estimator_keeps_each_voxel_at_its_place(estimator: str) -> None:
    rates = np.arange(1, 25, dtype=float).reshape(2, 3, 4) * 10
    magnitude = 1e4 * np.exp(-1e-3 * rates[..., None] * TWELVE_MS)
    fitted = fit_r2star(stack_of(magnitude), known(1.0), model=estimator)
    assert fitted.estimator == estimator
    assert fitted.r2star_per_s == pytest.approx(rates, rel=2e-3)
    assert fitted.s0 == pytest.approx(np.full(rates.shape, 1e4), rel=2e-3)


@pytest.mark.parametrize("estimator", ESTIMATORS)
def test_a_slice_with_a_missing_image_is_not_fitted(estimator: str) -> None:
    magnitude = np.broadcast_to(GOOD, (3, 3, 2, 12)).copy()
    magnitude[:, :, 1, 4] = np.nan
    present = np.ones((12, 2), dtype=bool)
    present[4, 1] = False
    fitted = fit_r2star(stack_of(magnitude, present), known(1.0), model=estimator)
    assert (fitted.outcome[:, :, 1] == FitOutcome.NOT_FITTED).all()
    assert np.isnan(fitted.r2star_per_s[:, :, 1]).all()
    assert (fitted.outcome[:, :, 0] == FitOutcome.CONVERGED).all()


def test_a_voxel_can_be_fitted_without_an_echo_that_another_needs() -> None:
    magnitude = np.broadcast_to(GOOD, (1, 2, 1, 12)).copy()
    magnitude[0, 1, 0, 4] = np.nan
    usable = np.isfinite(magnitude)
    for model in ("rician-ml", "log-linear"):
        fitted = fit_r2star(stack_of(magnitude), known(0.01), model=model, usable=usable)
        assert fitted.r2star_per_s == pytest.approx(np.full((1, 2, 1), 80.0), rel=1e-3)
        without = fit_r2star(stack_of(magnitude), known(0.01), model=model)
        assert np.isnan(without.r2star_per_s[0]).ravel().tolist() == [False, True]
    with pytest.raises(ValueError, match="usable has shape"):
        fit_r2star(stack_of(magnitude), known(0.01), usable=usable[..., :11])


def test_each_voxel_is_fitted_with_its_own_sigma() -> None:
    # At high SNR the standard error is proportional to sigma (methods sheet 4.1).
    magnitude = np.broadcast_to(100 * GOOD, (2, 2, 1, 12))
    sigma_map = np.array([[1.0, 2.0], [4.0, 8.0]])[..., None]
    fitted = fit_r2star(stack_of(magnitude), known(2.0, sigma_map))
    ratio = fitted.r2star_se_per_s / fitted.r2star_se_per_s[0, 0, 0]
    assert ratio == pytest.approx(sigma_map, rel=1e-3)


def test_the_fit_refuses_one_echo_and_unknown_estimators() -> None:
    one = EchoStack(
        magnitude=np.ones((1, 1, 1, 1)), echo_times_ms=np.array([1.0]),
        grid=Grid(shape=(1, 1, 1), affine_mm=np.eye(4)),
    )  # fmt: skip
    with pytest.raises(ValueError, match="two echoes"):
        fit_r2star(one, known(1.0))
    with pytest.raises(ValueError, match="unknown estimator 'magic'"):
        fit_r2star(stack_of(np.ones((1, 1, 1, 12))), known(1.0), model="magic")


def test_a_fit_is_locked_and_of_one_shape() -> None:
    fitted = fit_r2star(stack_of(np.broadcast_to(GOOD, (2, 2, 1, 12))), known(1.0))
    with pytest.raises(ValueError, match="read-only"):
        fitted.r2star_per_s[0, 0, 0] = 1.0
    with pytest.raises(ValueError, match="s0 has shape"):
        DecayFit(
            estimator="rician-ml", r2star_per_s=fitted.r2star_per_s, s0=fitted.s0[0],
            r2star_se_per_s=fitted.r2star_se_per_s, reduced_chi2=fitted.reduced_chi2,
            outcome=fitted.outcome,
        )  # fmt: skip


@pytest.mark.parametrize("estimator", ESTIMATORS)
def test_a_voxel_of_zeros_is_a_number_for_no_estimator(estimator: str) -> None:
    fitted = fit(np.zeros(12), TWELVE_MS, model=estimator)
    assert not fitted.r2star_per_s[0] > 0
    assert fitted.outcome[0] != FitOutcome.CONVERGED
