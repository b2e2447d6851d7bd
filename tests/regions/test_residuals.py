"""Residuals by echo: zero within their errors for a clean decay, what is wrong for a faulty one."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import kstest

from liverfe.regions.doubts.misfit import misfit
from liverfe.regions.doubts.sample import Sample
from tests.regions.faulty import TIMES_MS, scan


def drawn(seed: int, *, rate: float = 150.0, snr: float = 50.0, n_voxels: int = 300) -> Sample:
    rng = np.random.default_rng(seed)
    rates = rng.gamma(25.0, rate / 25.0, n_voxels)
    clean = snr * np.exp(-rates[:, None] * TIMES_MS * 1e-3)
    m = np.hypot(clean + rng.standard_normal(clean.shape), rng.standard_normal(clean.shape))
    return Sample(m=m, echo_times_ms=TIMES_MS, n_channels=1, sigma_sd=0.0, inflation=1.0)


def test_the_strain_of_clean_regions_is_chi_square_with_two_degrees_less_than_echoes() -> None:
    """Each voxel's decay takes two (methods sheet 5.3); so the threshold is a known chance."""
    found = [misfit(drawn(seed)) for seed in range(150)]
    assert {f.basis.shape[1] for f in found} == {len(TIMES_MS) - 2}
    assert kstest([f.strain() for f in found], "chi2", args=(10,)).pvalue > 0.01


@pytest.mark.parametrize("snr", [20.0, 60.0])
def test_the_pooled_chi_square_of_a_clean_region_is_one(snr: float) -> None:
    """Within four standard errors, sqrt(2 / (10 degrees x 3000 voxels)) = 0.8 %."""
    scatter = misfit(drawn(3, snr=snr, n_voxels=3000)).scatter
    assert scatter == pytest.approx(1.0, abs=4 * 0.0082)


def test_residuals_of_a_clean_region_are_zero_within_their_errors() -> None:
    decay = scan(150.0, side=30, seed=3).summary.decay  # type: ignore[union-attr]
    assert decay.residual is not None
    ratio = decay.residual / decay.residual_se
    assert np.abs(ratio).max() < 3.6
    assert 0.4 < ratio.std() < 1.6


def test_residuals_show_which_echo_is_weak() -> None:
    factor = np.ones(len(TIMES_MS))
    factor[3] = 0.9
    decay = scan(150.0, factor=factor).summary.decay  # type: ignore[union-attr]
    assert decay.residual is not None
    assert int(np.argmin(decay.residual)) == 3
    # Signal at 4.6 ms is 60 exp(-0.69) = 30 sigma; a tenth of it is 3, less what the fit takes up.
    assert -3.0 < decay.residual[3] < -1.8


def test_two_echoes_leave_no_residual() -> None:
    decay = scan(100.0, times_ms=np.array([1.2, 4.8])).summary.decay  # type: ignore[union-attr]
    assert decay.residual is None
    assert decay.residual_se is None


def test_three_echoes_leave_one_direction_and_no_cause() -> None:
    """Nothing can be told from anything else: the misfit is told, and no suspect."""
    bent = scan(100.0, times_ms=np.array([2.0, 6.0, 10.0]), factor=np.array([1.0, 0.8, 1.0]))
    assert bent.codes == {"poor-fit", "few-echoes"}
