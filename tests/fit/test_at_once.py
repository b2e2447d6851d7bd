"""Fits from several threads and processes at once: none aborts, none waits for ever."""

from __future__ import annotations

import multiprocessing
import os
import subprocess
import sys
import warnings
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from liverfe.fit import fit_rows
from tests.fit.decays import SIGMA_ONE, TWELVE_MS, decay, magnitudes

pytestmark = pytest.mark.slow

FIRST_CALLS = """
from concurrent.futures import ThreadPoolExecutor
from threading import Barrier
import numpy as np
from liverfe.fit import fit_rows, profile_r2star

together = Barrier(8)
times_ms = np.arange(1.0, 13.0)
signal = (50 * np.exp(-0.1 * times_ms) * np.ones((40_000, 1))).astype(np.float32)

def first_call(number):
    together.wait()
    if number % 2:
        return float(profile_r2star(signal[:50], times_ms, np.array([100.0]), np.ones(1), 1)[0, 0])
    return float(fit_rows(signal, times_ms, np.ones(1), 1).r2star_per_s[-1])

with ThreadPoolExecutor(8) as server:
    values = list(server.map(first_call, range(8)))
print(len(set(values[::2])), len(set(values[1::2])), round(values[0], 3))
"""


def noisy(n_voxels: int) -> np.ndarray:
    rng = np.random.default_rng(5)
    snr, r2star = rng.uniform(0, 120, n_voxels), rng.uniform(5, 2500, n_voxels)
    return magnitudes(decay(snr, r2star, TWELVE_MS), rng)


def rates(signal: np.ndarray) -> bytes:
    return fit_rows(signal, TWELVE_MS, SIGMA_ONE, 1).r2star_per_s.tobytes()


def send_rates(pipe: Any, signal: np.ndarray) -> None:
    with ThreadPoolExecutor(2) as server:
        pipe.send(list(server.map(rates, [signal, signal])))


def test_the_very_first_calls_may_come_from_eight_threads_of_a_server(repository: Path) -> None:
    # Kernels are then loaded or compiled while others wait for them. exp(-0.1 t) decays at 100 1/s;
    # it has no noise, so the likelihood takes off a little noise too much.
    ran = subprocess.run(
        [sys.executable, "-W", "error", "-c", FIRST_CALLS],
        cwd=repository, capture_output=True, text=True, timeout=240, check=False,
    )  # fmt: skip
    assert (ran.returncode, ran.stderr) == (0, "")
    n_fits, n_profiles, r2star = ran.stdout.split()
    assert (n_fits, n_profiles) == ("1", "1")
    assert float(r2star) == pytest.approx(100.0, rel=0.01)


@pytest.mark.skipif(not hasattr(os, "fork"), reason="this system cannot fork")
def test_a_forked_process_of_one_that_has_fitted_fits_with_threads_of_its_own() -> None:
    # A compiled parallel loop's pool of threads does not survive a fork and aborts the child.
    signal = noisy(40_000)
    here = rates(signal)
    context = multiprocessing.get_context("fork")
    receiver, sender = context.Pipe(duplex=False)
    child = context.Process(target=send_rates, args=(sender, signal))
    with warnings.catch_warnings():
        # Python 3.12 warns of any fork beside a thread, for example one of the test runner.
        warnings.simplefilter("ignore", DeprecationWarning)
        child.start()
    try:
        assert receiver.poll(60), "the forked process does not answer"
        assert receiver.recv() == [here, here]
        child.join(30)
        assert child.exitcode == 0
    finally:
        child.kill()
        child.join()
