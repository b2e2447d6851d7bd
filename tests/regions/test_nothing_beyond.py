"""Whatever a region is like, no number beyond its limit leaves this room."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.echoes import EchoStack
from liverfe.errors import StudyRefused
from liverfe.fit import fit_r2star
from liverfe.grid import Grid
from liverfe.maps import judge, repaint
from liverfe.noise import NoiseLevel
from liverfe.regions import RegionRules, summarise_region

pytestmark = pytest.mark.slow

SHAPE = (20, 18, 2)


def draw(rng: np.random.Generator) -> tuple[EchoStack, NoiseLevel, np.ndarray]:
    """Any echoes, signal, channels, iron and outline; some voxels black, some sigma uneven."""
    times_ms = np.cumsum(rng.uniform(0.5, 3.0, rng.integers(2, 13)))
    mask = np.zeros(SHAPE, dtype=bool)
    width = rng.integers(1, (15, 13), 2)
    mask[3 : 3 + width[0], 3 : 3 + width[1], : rng.integers(1, 3)] = True
    n_channels = int(rng.choice([1, 1, 4, 16]))
    rate = np.full(SHAPE, 40.0)
    mean, cv = 10.0 ** rng.uniform(0.0, 3.6), rng.choice([0.01, 0.1, 0.4, 1.0])
    rate[mask] = rng.gamma(1.0 / cv**2, mean * cv**2, mask.sum())
    level = np.full(SHAPE, 10.0 ** rng.uniform(0.3, 2.3))
    if rng.random() < 0.3:
        level[mask] *= rng.random(mask.sum()) < rng.random()
    clean = level[..., None] * np.exp(-1e-3 * rate[..., None] * times_ms)
    power = (clean + rng.standard_normal(clean.shape)) ** 2
    power += rng.chisquare(2 * n_channels - 1, clean.shape)
    stack = EchoStack(
        magnitude=np.sqrt(power).astype(np.float32),
        echo_times_ms=times_ms,
        grid=Grid(shape=SHAPE, affine_mm=np.eye(4)),
    )
    ramp = np.linspace(0.8, 1.3, SHAPE[0], dtype=np.float32)[:, None, None]
    noise = NoiseLevel(
        sigma=1.0, n_channels=n_channels, method="given",
        relative_sd=float(rng.choice([0.0, 0.01, 0.1])),
        sigma_map=np.broadcast_to(ramp, SHAPE) if rng.random() < 0.3 else None,
    )  # fmt: skip
    return stack, noise, mask


@pytest.mark.parametrize("seed", range(3))
def test_no_number_lies_beyond_the_limit(seed: int) -> None:
    rng = np.random.default_rng(seed)
    stated = 0
    for _ in range(30):
        stack, noise, mask = draw(rng)
        fit = fit_r2star(stack, noise)
        rules = RegionRules(voxel_relative_se=float(rng.choice([0.1, 0.1, 0.3])))
        try:
            summary = summarise_region("liver", "liver", mask, stack, noise, fit, rules)
        except StudyRefused:
            continue
        stated += 1
        r2star, limit = summary.r2star, summary.limits.high_r2star_per_s
        numbers = [r2star.value, r2star.low, r2star.high, r2star.mean, r2star.before_trimming]
        told = [number for number in numbers if number is not None]
        assert np.isfinite(told).all()
        assert max(told) <= limit
        assert r2star.low is None or r2star.low <= r2star.value
        assert r2star.high is None or r2star.high >= r2star.value
        maps = repaint(
            judge(fit, stack, noise), fit, stack, mask=mask, over_limit=summary.over_limit,
            measured=summary.used,
        )  # fmt: skip
        assert (maps.r2star_per_s[summary.used] <= limit).all()
        assert np.isnan(maps.r2star_per_s[summary.over_limit]).all()
    assert stated >= 12
