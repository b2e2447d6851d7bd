"""Faults of echoes are told or refused, clean regions raise nothing (faults A9-A12, B3-B6)."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.echoes import EchoStack
from liverfe.errors import StudyRefused
from liverfe.grid import Grid
from liverfe.noise import NoiseLevel
from liverfe.regions.doubts import check_decay
from liverfe.study import Method, assess_study
from tests.scenes import ORGAN_VOXELS, TIMES_MS, Scene, make_scene

pytestmark = pytest.mark.slow

NOT_OF_THE_SIGNAL = {"band-depends-on-curve", "near-threshold", "channels-not-tested"}
"""Notes that a clean study may have too."""


def caution_codes(scene: Scene) -> set[str]:
    try:
        result = assess_study(scene.stack, [scene.region()], Method())
    except StudyRefused as refusal:
        return {finding.code for finding in refusal.findings}
    return {finding.code for finding in result.findings if finding.level != "note"}


def told_codes(scene: Scene) -> set[str]:
    """Notes too: a fault that moves R2* by less than 5 % is one."""
    try:
        result = assess_study(scene.stack, [scene.region()], Method())
    except StudyRefused as refusal:
        return {finding.code for finding in refusal.findings}
    return {finding.code for finding in result.findings} - NOT_OF_THE_SIGNAL


@pytest.mark.parametrize("spread", [0.0, 0.2, 0.35])
@pytest.mark.parametrize("r2star_per_s", [30.0, 200.0, 580.0])
def test_a_clean_region_raises_no_caution(r2star_per_s: float, spread: float) -> None:
    """Iron that differs from voxel to voxel is no fault of the echoes."""
    rates: float | np.ndarray = r2star_per_s
    if spread:
        rng = np.random.default_rng(4)
        rates = rng.gamma(1 / spread**2, r2star_per_s * spread**2, ORGAN_VOXELS)
    assert caution_codes(make_scene(rates, snr=100.0)) == set()


@pytest.mark.parametrize("r2star_per_s", [200.0, 580.0])
def test_every_fault_of_the_echoes_is_told(r2star_per_s: float) -> None:
    scene = make_scene(r2star_per_s, snr=200.0)
    m = np.array(scene.stack.magnitude)

    def swapped(*order: int) -> Scene:
        return scene.with_magnitude(m[..., list(order)])

    def scaled(echoes: slice, factor: float) -> Scene:
        changed = m.copy()
        changed[..., echoes] *= factor
        return scene.with_magnitude(changed)

    faults = {
        "first two swapped": swapped(1, 0, *range(2, 12)),
        "two swapped": swapped(0, 1, 2, 4, 3, *range(5, 12)),
        "one lost, list shortened": scene.with_magnitude(
            m[..., [0, 1, 2, 3, 5, 6, 7, 8, 9, 10, 11]], TIMES_MS[:11]
        ),
        "sorted by name": swapped(0, 9, 10, 11, *range(1, 9)),
        "reversed": swapped(*range(11, -1, -1)),
        "motion in echoes 3 to 5": scaled(slice(2, 5), 0.7),
        "even echoes weaker": scaled(slice(1, None, 2), 0.85),
        "constant added": scene.with_magnitude(m + 10.0),
        "first echoes saturated": scene.with_magnitude(np.minimum(m, 0.6 * m[scene.organ].max())),
        "each echo scaled to its maximum": scene.with_magnitude(
            100.0 * m / m[scene.body].max(axis=0)
        ),
    }
    silent = {name for name, faulty in faults.items() if not told_codes(faulty)}
    assert silent == set()


def test_swapped_echoes_are_refused_and_named() -> None:
    scene = make_scene(580.0, snr=200.0)
    m = np.array(scene.stack.magnitude)[..., [1, 0, *range(2, 12)]]
    with pytest.raises(StudyRefused) as refusal:
        assess_study(scene.with_magnitude(m).stack, [scene.region()], Method())
    assert refusal.value.findings[0].code == "echoes-swapped"
    assert "1, 2.2 ms" in refusal.value.findings[0].text


def test_reversed_echoes_are_refused() -> None:
    scene = make_scene(300.0)
    reverse = scene.with_magnitude(np.array(scene.stack.magnitude)[..., ::-1])
    with pytest.raises(StudyRefused) as refusal:
        assess_study(reverse.stack, [reverse.region()], Method())
    assert refusal.value.findings[0].code == "signal-rises"


def test_two_echoes_say_that_nothing_checks_the_model() -> None:
    scene = make_scene(100.0, times_ms=np.array([1.2, 4.8]), snr=100.0)
    assert caution_codes(scene) == {"two-echoes"}


def test_fat_and_water_in_and_out_of_phase_are_told() -> None:
    """One fat peak at 3.4 ppm, 217 Hz at 1.5 T (methods sheet 3.2), a fifth of the signal."""
    scene = make_scene(60.0, snr=200.0)
    phase = np.exp(2j * np.pi * 217.1e-3 * TIMES_MS)
    oscillation = np.abs(0.8 + 0.2 * phase)
    m = np.array(scene.stack.magnitude)
    m[scene.organ] *= oscillation
    told = told_codes(scene.with_magnitude(m))
    assert told & {"fat-oscillation", "signal-not-falling", "poor-fit", "decay-slightly-off"}


def test_three_and_four_echoes_say_that_they_can_hardly_check_the_model() -> None:
    for n_echoes, told in ((3, {"few-echoes"}), (4, {"few-echoes"}), (5, set())):
        times = 1.2 * np.arange(1, n_echoes + 1)
        scene = make_scene(150.0, snr=80.0, times_ms=times)
        assert caution_codes(scene) == told, n_echoes


def test_means_of_a_few_dark_voxels_do_not_rise_by_chance() -> None:
    # 20 voxels of heavy iron at SNR 20, three times refused in a hundred before: the second echo is
    # at the floor, and means of 20 voxels there differ by sigma / 4.5.
    times = 1.0 + 1.2 * np.arange(12)
    for seed in range(60):
        rng = np.random.default_rng(seed)
        amplitude = 20.0 * np.exp(-1.5 * times)
        shape = (5, 4, 1, 12)
        noise = rng.standard_normal((2, *shape))
        magnitude = np.hypot(amplitude + noise[0], noise[1])
        grid = Grid(shape=shape[:3], affine_mm=np.diag([3.0, 3.0, 8.0, 1.0]))
        stack = EchoStack(magnitude=magnitude, echo_times_ms=times, grid=grid)
        known = NoiseLevel(sigma=1.0, n_channels=1, method="given", relative_sd=0.0)
        assert check_decay("liver", np.ones(shape[:3], dtype=bool), stack, known) == (), seed
