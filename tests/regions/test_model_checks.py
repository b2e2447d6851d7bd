"""Faults of echoes are told or refused, clean regions raise nothing (faults A9-A12, B3-B6)."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.errors import StudyRefused
from liverfe.study import Method, assess_study
from tests.scenes import ORGAN_VOXELS, TIMES_MS, Scene, make_scene

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
