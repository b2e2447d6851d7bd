"""The same voxels give the same bits: on any number of threads, in any order, in any process."""

from __future__ import annotations

import multiprocessing
from concurrent.futures import ProcessPoolExecutor, ThreadPoolExecutor

import numba
import numpy as np
import pytest

from liverfe.fit import ESTIMATORS, DecayRows, blocks, fit_rows
from tests.fit.decays import SIGMA_ONE, TWELVE_MS, decay, magnitudes

FIELDS = ("r2star_per_s", "s0", "r2star_se_per_s", "reduced_chi2", "outcome")


@pytest.fixture(scope="module")
def signal() -> np.ndarray:
    """Voxels of all kinds, among them some that are noise, and one that is no number."""
    rng = np.random.default_rng(41)
    n_voxels = 2 * 16_384 + 777
    snr = rng.uniform(0, 120, n_voxels)
    rows = magnitudes(decay(snr, rng.uniform(5, 2500, n_voxels), TWELVE_MS), rng)
    rows[5, 3] = np.nan
    return rows


@pytest.fixture(scope="module")
def expected(signal: np.ndarray) -> DecayRows:
    return fit_rows(signal, TWELVE_MS, SIGMA_ONE, 1)


def assert_same(one: DecayRows, other: DecayRows) -> None:
    for name in FIELDS:
        np.testing.assert_array_equal(getattr(one, name), getattr(other, name), err_msg=name)


@pytest.mark.parametrize("n_threads", [1, 2, 5])
@pytest.mark.parametrize("block", [1_000, 16_384])
def test_threads_and_blocks_change_no_bit(
    signal: np.ndarray, expected: DecayRows, n_threads: int, block: int,
    monkeypatch: pytest.MonkeyPatch,
) -> None:  # fmt: skip
    monkeypatch.setattr(numba.config, "NUMBA_NUM_THREADS", n_threads)
    monkeypatch.setattr(blocks, "_BLOCK", block)
    assert_same(fit_rows(signal, TWELVE_MS, SIGMA_ONE, 1), expected)


def test_order_and_subset_change_no_bit(signal: np.ndarray, expected: DecayRows) -> None:
    chosen = np.random.default_rng(42).permutation(len(signal))[:3000]
    fitted = fit_rows(signal[chosen], TWELVE_MS, SIGMA_ONE, 1)
    for name in FIELDS:
        np.testing.assert_array_equal(getattr(fitted, name), getattr(expected, name)[chosen])
    alone = fit_rows(signal[:1], TWELVE_MS, SIGMA_ONE, 1)
    assert alone.r2star_per_s[0] == expected.r2star_per_s[0]


def test_calls_from_four_threads_at_once_change_no_bit(
    signal: np.ndarray, expected: DecayRows
) -> None:
    with ThreadPoolExecutor(4) as pool:
        calls = [pool.submit(fit_rows, signal, TWELVE_MS, SIGMA_ONE, 1) for _ in range(4)]
        for call in calls:
            assert_same(call.result(), expected)


def test_a_spawned_process_gives_the_same_bits(signal: np.ndarray, expected: DecayRows) -> None:
    few = slice(0, 20_000)  # more than a block: the worker uses threads of its own
    with ProcessPoolExecutor(1, mp_context=multiprocessing.get_context("spawn")) as pool:
        fitted = pool.submit(fit_rows, signal[few], TWELVE_MS, SIGMA_ONE, 1).result(timeout=120)
    for name in FIELDS:
        np.testing.assert_array_equal(getattr(fitted, name), getattr(expected, name)[few])


@pytest.mark.parametrize("estimator", ESTIMATORS[1:])
def test_the_other_estimators_do_not_hang_on_blocks_either(
    signal: np.ndarray, estimator: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    some = signal[:3000]
    whole = fit_rows(some, TWELVE_MS, SIGMA_ONE, 1, model=estimator)
    monkeypatch.setattr(blocks, "_BLOCK", 701)
    monkeypatch.setattr(numba.config, "NUMBA_NUM_THREADS", 3)
    assert_same(fit_rows(some, TWELVE_MS, SIGMA_ONE, 1, model=estimator), whole)
