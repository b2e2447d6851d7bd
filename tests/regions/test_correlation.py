"""How alike the noise of neighbours is, against closed forms and brute force."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.echoes import EchoStack
from liverfe.fit import fit_r2star
from liverfe.grid import Grid
from liverfe.noise import NoiseLevel
from liverfe.regions.correlation import (
    WHITE,
    NoiseCorrelation,
    effective_count,
    noise_correlation,
    pair_counts,
)
from liverfe.regions.surroundings import correlation_around
from tests.regions.patches import interpolated_noise, square
from tests.scenes import TIMES_MS


def sinc_correlation(longest: int, factor: float) -> NoiseCorrelation:
    """Ideal zero-filling: correlation sinc(h / factor) along each axis."""
    along = np.sinc(np.arange(longest + 1) / factor)
    return NoiseCorrelation(in_plane=np.outer(along, along), between_slices=np.ones(1))


@pytest.mark.parametrize(("side", "count"), [(10, 26.7), (20, 103.3), (40, 406.4)])
def test_zero_filled_regions_count_as_tabulated(side: int, count: float) -> None:
    """Methods sheet 5.2 [computed]: zero-filling by two with an ideal sinc."""
    mask = np.ones((side, side, 1), dtype=bool)
    found = effective_count(mask, sinc_correlation(side - 1, 2.0))
    assert found == pytest.approx(count, abs=0.06)


def test_independent_voxels_count_in_full() -> None:
    mask = np.random.default_rng(1).random((9, 14, 3)) < 0.5
    assert effective_count(mask, WHITE) == mask.sum()


def test_pairs_of_a_ragged_mask_are_counted_as_by_hand() -> None:
    mask = np.random.default_rng(2).random((11, 8, 4)) < 0.6
    distance = np.abs(np.argwhere(mask)[:, None] - np.argwhere(mask)[None])
    counts = pair_counts(mask, longest=4, slices=2)
    for lag in np.ndindex(5, 5, 3):
        assert counts[lag] == pytest.approx((distance == lag).all(axis=-1).sum(), abs=0.01)


@pytest.mark.parametrize("factor", [1.5, 2.0])
def test_interpolation_is_seen_whatever_the_pattern_of_iron(factor: float) -> None:
    """White iron with a CV of 0.3 hides the correlation of R2* itself; residuals keep it."""
    rng = np.random.default_rng(3)
    rate = 200.0 * (1.0 + 0.3 * rng.standard_normal((64, 64)).clip(-2.5, 2.5))
    clean = 60.0 * np.exp(-1e-3 * rate[..., None] * TIMES_MS)
    noise = interpolated_noise(rng, 64, len(TIMES_MS), factor)
    stack = EchoStack(
        magnitude=np.abs(clean + noise)[:, :, None].astype(np.float32),
        echo_times_ms=TIMES_MS,
        grid=Grid(shape=(64, 64, 1), affine_mm=np.eye(4)),
    )
    level = NoiseLevel(sigma=1.0, n_channels=1, method="given", relative_sd=0.0)
    mask = square(64, 20)
    seen = correlation_around(mask, stack, level, fit_r2star(stack, level)).in_plane
    expected = np.sinc(np.arange(4) / factor)
    assert seen[:4, 0] == pytest.approx(expected, abs=0.05)
    assert seen[0, :4] == pytest.approx(expected, abs=0.05)
    assert seen[1, 1] == pytest.approx(expected[1] ** 2, abs=0.05)


def test_white_noise_is_not_taken_for_correlated() -> None:
    """Thirty images' worth of chance: the count stays within a few percent of the voxels."""
    rng = np.random.default_rng(4)
    mask = square(40, 20)
    ratios = []
    for _ in range(30):
        residuals = rng.standard_normal((400, 6))
        found = noise_correlation(residuals, np.ones((400, 6), dtype=bool), mask)
        ratios.append(effective_count(mask, found) / 400.0)
    assert np.mean(ratios) == pytest.approx(1.0, abs=0.12)


def test_a_misfit_that_all_voxels_share_is_no_correlation() -> None:
    rng = np.random.default_rng(5)
    mask = square(40, 20)
    pattern = np.array([1.0, -1.0, 0.8, -0.8, 0.5, -0.5])
    residuals = rng.standard_normal((400, 6)) + pattern
    found = noise_correlation(residuals, np.ones((400, 6), dtype=bool), mask)
    assert effective_count(mask, found) > 250.0


def test_correlation_between_slices_is_seen() -> None:
    """Each slice the mean of two neighbours: correlation 1/2 at one slice, none at two."""
    rng = np.random.default_rng(6)
    raw = rng.standard_normal((24, 24, 5, 6))
    mixed = (raw[:, :, :-1] + raw[:, :, 1:]).reshape(-1, 6) / np.sqrt(2.0)
    mask = np.ones((24, 24, 4), dtype=bool)
    found = noise_correlation(mixed, np.ones(mixed.shape, dtype=bool), mask)
    assert found.between_slices == pytest.approx([1.0, 0.5, 0.0], abs=0.06)
    assert not found.is_white
