"""Regions too weak for single voxels: all decays fitted together, or refused."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from liverfe.errors import StudyRefused
from tests.regions.patches import Patch

pytestmark = pytest.mark.slow

WEAK = Patch(r2star_per_s=60.0, snr=4.0, side=20, size=32)
"""At S0 / sigma 4 one voxel knows R2* to 44 % at best, at 95 /s (Cramér-Rao bound, 1.0 + 1.2 k)."""


def codes(patch: Patch, **more: object) -> set[str]:
    summary, _ = patch.measure(np.random.default_rng(3), **more)
    return {finding.code for finding in summary.findings}


def test_weak_voxels_are_measured_together_and_told() -> None:
    held, errors = 0, []
    rng = np.random.default_rng(1)
    for _ in range(12):
        summary, truth = WEAK.measure(rng)
        r2star = summary.r2star
        assert r2star.statistic == "joint"
        assert r2star.qualifier == "="
        assert "measured-jointly" in {finding.code for finding in summary.findings}
        assert r2star.low is not None
        held += r2star.low <= truth <= (r2star.high or np.inf)
        errors.append(r2star.value / truth - 1.0)
        assert summary.limits.s0 == pytest.approx(4.0, rel=0.05)
        assert summary.limits.high_r2star_per_s == pytest.approx(95.0, rel=0.08)
    # Bound of 400 voxels together: 2.4 % each time, 0.7 % for twelve.
    assert abs(np.mean(errors)) <= 0.025
    assert held >= 10


def test_beyond_what_voxels_measure_best_the_joint_fit_states_the_limit() -> None:
    summary, _ = replace(WEAK, r2star_per_s=170.0).measure(np.random.default_rng(2))
    assert summary.r2star.statistic == "joint"
    assert summary.r2star.qualifier == ">"
    assert summary.r2star.value == summary.limits.high_r2star_per_s < 170.0
    assert summary.r2star.high is None
    assert summary.r2star.sd_biological is None


@pytest.mark.parametrize(
    "patch",
    [
        replace(WEAK, snr=2.0),
        replace(WEAK, side=6),
        replace(WEAK, cv=0.45),
        replace(WEAK, sigma_relative_sd=0.3),
    ],
    ids=["weaker still", "36 voxels", "uneven iron", "sigma unknown"],
)
def test_what_the_rule_forbids_is_refused(patch: Patch) -> None:
    with pytest.raises(StudyRefused) as refusal:
        patch.measure(np.random.default_rng(3))
    assert refusal.value.findings[0].code in {"signal-too-low", "no-tissue-signal"}


def test_voxels_without_any_signal_among_the_others_are_not_passed_over() -> None:
    """A third of the region is black; the rest alone would say 60 /s."""
    level = np.where(np.arange(400) % 3 == 0, 0.0, 4.0)
    with pytest.raises(StudyRefused) as refusal:
        WEAK.measure(np.random.default_rng(4), s0=level)
    assert refusal.value.findings[0].code == "signal-too-low"


@pytest.mark.parametrize("snr", [12.0, 50.0])
def test_where_voxels_can_speak_their_median_stands(snr: float) -> None:
    summary, _ = replace(WEAK, snr=snr).measure(np.random.default_rng(5))
    assert summary.r2star.statistic == "median"
    assert "measured-jointly" not in {finding.code for finding in summary.findings}
