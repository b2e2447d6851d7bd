"""Each voxel is judged by what the scan can resolve, and a map shows measured voxels only."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.fit import fit_r2star
from liverfe.maps import DecayMaps, VoxelStatus, judge, repaint
from liverfe.noise import NoiseLevel, estimate_noise
from tests.scenes import Scene, make_scene


def judged(scene: Scene) -> DecayMaps:
    noise = estimate_noise(scene.stack)
    return judge(fit_r2star(scene.stack, noise), scene.stack, noise)


def share(maps: DecayMaps, where: np.ndarray, status: VoxelStatus) -> float:
    return float((maps.status[where] == status).mean())


def test_air_is_outside_and_tissue_is_measured() -> None:
    scene = make_scene(300.0, snr=50.0)
    maps = judged(scene)
    assert share(maps, scene.organ, VoxelStatus.MEASURED) == 1.0
    assert share(maps, scene.body & ~scene.organ, VoxelStatus.MEASURED) > 0.999
    assert share(maps, ~scene.body, VoxelStatus.OUTSIDE) > 0.99


@pytest.mark.parametrize("r2star_per_s", [1500.0, 4000.0])
def test_a_decay_too_fast_is_over_the_limit_and_has_no_number(r2star_per_s: float) -> None:
    scene = make_scene(r2star_per_s, snr=50.0)
    maps = judged(scene)
    assert share(maps, scene.organ, VoxelStatus.MEASURED) < 0.05
    hidden = maps.status != VoxelStatus.MEASURED
    for name in ("r2star_per_s", "t2star_ms", "s0", "r2star_se_per_s", "reduced_chi2"):
        values = getattr(maps, name)
        assert np.isnan(values[hidden]).all(), name
        assert np.isfinite(values[~hidden]).all(), name


def test_maps_agree_with_each_other_and_with_the_truth() -> None:
    scene = make_scene(200.0, snr=100.0)
    maps = judged(scene)
    inside = scene.organ
    np.testing.assert_allclose(
        maps.t2star_ms[inside], 1000.0 / maps.r2star_per_s[inside], rtol=1e-5
    )
    assert np.median(maps.s0[inside]) == pytest.approx(100.0, rel=0.01)
    scatter = (maps.r2star_per_s[inside] - 200.0) / maps.r2star_se_per_s[inside]
    assert scatter.std() == pytest.approx(1.0, abs=0.1)
    assert maps.reduced_chi2[inside].mean() == pytest.approx(1.0, abs=0.06)


def test_the_limit_of_a_voxel_follows_its_own_signal() -> None:
    """Limits for 1.0 + 1.2 k ms from the users sheet [computed]: 276 /s at 20, 805 /s at 50."""
    bright, dim = make_scene(500.0, snr=50.0), make_scene(500.0, snr=50.0, organ_s0=40.0)
    assert share(judged(bright), bright.organ, VoxelStatus.MEASURED) > 0.99
    assert share(judged(dim), dim.organ, VoxelStatus.OVER_LIMIT) > 0.8


def test_a_voxel_with_signal_in_one_echo_is_over_the_limit() -> None:
    """Two echoes, 12 and 24 ms: at 180 /s the second holds 50 exp(-4.3) = 0.7 sigma. A limit as
    wide as 50 % must not let its R2* through.
    """
    scene = make_scene(180.0, snr=50.0, times_ms=np.array([12.0, 24.0]))
    noise = NoiseLevel(sigma=2.0, n_channels=1, method="given", relative_sd=0.0)
    maps = judge(fit_r2star(scene.stack, noise), scene.stack, noise, voxel_relative_se=0.5)
    shown = scene.organ & (maps.status == VoxelStatus.MEASURED)
    amplitude = maps.s0[shown] * np.exp(-24e-3 * maps.r2star_per_s[shown])
    assert (amplitude >= 0.96 * 2.0).all()
    assert share(maps, scene.organ, VoxelStatus.OVER_LIMIT) > 0.3


def test_a_region_paints_its_own_judgement() -> None:
    scene = make_scene(300.0, snr=50.0, organ_s0=0.0)
    noise = estimate_noise(scene.stack)
    fit = fit_r2star(scene.stack, noise)
    maps = judge(fit, scene.stack, noise)
    assert share(maps, scene.organ, VoxelStatus.OUTSIDE) > 0.95
    painted = repaint(
        maps, fit, scene.stack, mask=scene.organ, over_limit=scene.organ,
        measured=np.zeros_like(scene.organ),
    )  # fmt: skip
    assert share(painted, scene.organ, VoxelStatus.OVER_LIMIT) == 1.0
    assert np.array_equal(painted.status[~scene.organ], maps.status[~scene.organ])


def test_slices_with_a_missing_image_are_not_measured() -> None:
    scene = make_scene(300.0)
    m = np.array(scene.stack.magnitude)
    m[:, :, 1, 5] = np.nan
    maps = judged(scene.with_magnitude(m))
    assert (maps.status[:, :, 1] == VoxelStatus.OUTSIDE).all()
    assert share(maps, scene.organ & (np.arange(2) == 0), VoxelStatus.MEASURED) == 1.0
