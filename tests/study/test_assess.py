"""The whole science on scenes of known truth: LIC, headline, verdicts, refusals."""

from __future__ import annotations

import numpy as np
import pytest

from liverfe.errors import StudyRefused
from liverfe.study import ESTIMATORS, Method, StudyResult, assess_study, refused_result
from tests.scenes import ORGAN_VOXELS, S0, Scene, make_scene

pytestmark = pytest.mark.slow


def assess(scene: Scene, *names: str, **choices: object) -> StudyResult:
    regions = [scene.region(name) for name in names or ("liver",)]
    return assess_study(scene.stack, regions, Method(**choices))


def codes(result: StudyResult, level: str) -> set[str]:
    return {finding.code for finding in result.findings if finding.level == level}


@pytest.mark.parametrize("lic_mg_per_g", [1.0, 5.0, 10.0, 15.0, 20.0])
def test_lic_is_that_of_the_published_line(lic_mg_per_g: float) -> None:
    """LIC = -0.16 + 2.603e-2 R2* (Hernando 2023, DOI 10.1148/radiol.213256 [abstract])."""
    result = assess(make_scene((lic_mg_per_g + 0.16) / 0.02603, snr=100.0))
    iron = result.regions[0].iron
    assert iron is not None
    assert iron.value_mg_per_g == pytest.approx(lic_mg_per_g, rel=0.02)
    assert iron.qualifier == "="
    assert result.outcome == "reported"
    assert not result.has_caution


@pytest.mark.parametrize("n_channels", [1, 4, 16])
def test_sums_of_squares_read_as_true_as_one_coil(n_channels: int) -> None:
    """Fault A13: 16 coils corrected as one make 15 mg/g read 11.5."""
    result = assess(make_scene(582.4, snr=80.0, n_channels=n_channels))
    assert result.noise is not None
    assert result.noise.n_channels == pytest.approx(n_channels, rel=0.1)
    assert result.regions[0].summary.r2star.value == pytest.approx(582.4, rel=0.03)


@pytest.mark.parametrize("true_mg_per_g", [5.0, 10.0, 15.0, 20.0, 30.0, 40.0, 60.0])
def test_no_iron_ever_reads_low_in_silence(true_mg_per_g: float) -> None:
    """Plain fits turn 30 mg/g into 3 (faults sheet); ours is right, or over the limit and told."""
    result = assess(make_scene((true_mg_per_g + 0.16) / 0.02603, snr=50.0))
    iron = result.regions[0].iron
    assert iron is not None
    if iron.qualifier == "=":
        assert iron.value_mg_per_g == pytest.approx(true_mg_per_g, rel=0.05)
    else:
        assert iron.qualifier == ">"
        assert iron.value_mg_per_g < true_mg_per_g
        assert "censored-over-limit" in codes(result, "caution")


def test_masked_air_is_replaced_by_residuals() -> None:
    """Fault A14: background zeroed by the scanner must not make sigma zero."""
    scene = make_scene(300.0, snr=50.0)
    masked = np.where(scene.body[..., None], scene.stack.magnitude, 0.0)
    result = assess(scene.with_magnitude(masked))
    assert result.noise is not None
    assert result.noise.method == "residual"
    assert result.noise.sigma == pytest.approx(S0 / 50.0, rel=0.05)
    assert result.regions[0].summary.r2star.value == pytest.approx(300.0, rel=0.02)
    # The floor in dark echoes of the organ tells that there is one channel.
    assert result.noise.channels_between is None
    assert not codes(result, "note") & {"channels-not-tested"}


def test_air_that_is_not_the_tissues_noise_is_told_where_it_matters() -> None:
    """Fault A15: sigma in air is a third of that in tissue."""
    scene = make_scene(700.0, snr=50.0)
    m = np.array(scene.stack.magnitude)
    m[~scene.body] /= 3.0
    result = assess(scene.with_magnitude(m))
    assert result.noise is not None
    assert result.noise.method == "residual"
    assert result.noise.sigma == pytest.approx(S0 / 50.0, rel=0.06)
    # Two candidates that differ threefold: the difference is told, as its size deserves.
    assert {"noise-disagrees", "noise-cross-check"} & (
        codes(result, "caution") | codes(result, "note")
    )


@pytest.mark.parametrize(
    ("field_strength_t", "code"), [(None, "field-unknown"), (0.55, "no-curve-for-field")]
)
def test_without_a_curve_r2star_stands_and_no_lic(
    field_strength_t: float | None, code: str
) -> None:
    result = assess(make_scene(300.0, field_strength_t=field_strength_t))
    assert result.regions[0].iron is None
    assert result.lic_mg_per_g is None
    assert result.regions[0].summary.r2star.value == pytest.approx(300.0, rel=0.02)
    assert code in codes(result, "caution")


def test_a_curve_of_another_field_is_refused() -> None:
    with pytest.raises(StudyRefused) as refusal:
        assess(make_scene(300.0), curve="hernando2023_3p0")
    assert refusal.value.findings[0].code == "curve-of-another-field"


def test_other_organs_get_no_lic_and_do_not_lead() -> None:
    scene = make_scene(300.0)
    spleen = scene.region("spleen", mask=scene.organ[::-1])
    result = assess_study(scene.stack, [spleen, scene.region("right lobe")], Method())
    assert result.headline == "right lobe"
    assert [r.iron is None for r in result.regions] == [True, False]


def test_without_liver_there_is_no_headline() -> None:
    result = assess(make_scene(300.0), "spleen")
    assert result.headline is None
    assert "no-liver-region" in codes(result, "caution")


def test_without_regions_there_are_maps_and_a_word_why_no_lic() -> None:
    result = assess_study(make_scene(300.0).stack, [], Method())
    assert result.maps is not None
    assert result.headline is None
    assert "no-region" in codes(result, "caution")


def test_several_liver_regions_are_pooled_and_the_whole_liver_leads() -> None:
    scene = make_scene(300.0)
    upper, lower = scene.organ.copy(), scene.organ.copy()
    upper[..., 0], lower[..., 1] = False, False
    parts = [scene.region("segment 7", mask=upper), scene.region("segment 6", mask=lower)]
    pooled = assess_study(scene.stack, parts, Method())
    assert pooled.headline == "liver regions pooled"
    assert pooled.headline_region is not None
    assert pooled.headline_region.summary.n_voxels == scene.organ.sum()
    whole = assess_study(scene.stack, [*parts, scene.region("whole liver")], Method())
    assert whole.headline == "whole liver"
    assert len(whole.regions) == 3
    assert "regions-overlap" in codes(whole, "note")


@pytest.mark.parametrize("estimator", ESTIMATORS)
def test_every_estimator_runs_and_plain_ones_carry_a_caution(estimator: str) -> None:
    result = assess(make_scene(200.0, snr=200.0), estimator=estimator)
    assert result.regions[0].summary.r2star.value == pytest.approx(200.0, rel=0.03)
    plain = estimator not in ("rician-ml", "first-moment", "weighted-first-moment")
    assert ("estimator-for-comparison" in codes(result, "caution")) == plain


def test_phase_given_as_magnitude_is_refused() -> None:
    scene = make_scene(300.0)
    signed = scene.with_magnitude(np.array(scene.stack.magnitude) - 20.0)
    with pytest.raises(StudyRefused) as refusal:
        assess(signed)
    assert refusal.value.findings[0].code == "signal-negative"


def test_the_maps_show_the_regions_judgement() -> None:
    result = assess(make_scene(300.0, snr=50.0, organ_s0=0.0))
    assert result.maps is not None
    organ = make_scene(300.0).organ
    assert (result.maps.status[organ] == 2).mean() > 0.99
    assert np.isnan(result.maps.r2star_per_s[organ]).mean() > 0.99


def test_a_refused_result_holds_findings_and_no_number() -> None:
    with pytest.raises(StudyRefused) as refusal:
        assess(make_scene(300.0), curve="hernando2023_3p0")
    result = refused_result(refusal.value.findings, Method())
    assert result.outcome == "refused"
    assert result.findings[0].level == "stop"
    assert (result.regions, result.maps, result.curve, result.headline) == ((), None, None, None)


def test_findings_come_gravest_first_and_once() -> None:
    result = assess(make_scene(2000.0, snr=50.0), "segment 6", "segment 7")
    levels = [finding.level for finding in result.findings]
    assert levels == sorted(levels, key=("stop", "caution", "note").index)
    assert len(set(result.findings)) == len(result.findings)


def test_the_result_is_the_same_to_the_bit_when_made_again() -> None:
    one, two = (assess(make_scene(400.0, snr=40.0)) for _ in range(2))
    assert one.maps is not None
    assert two.maps is not None
    assert one.maps.r2star_per_s.tobytes() == two.maps.r2star_per_s.tobytes()
    assert one.regions[0].iron == two.regions[0].iron


@pytest.mark.parametrize("constant", [0.7, 2.0, 6.0])
def test_a_constant_added_to_the_images_is_told(constant: float) -> None:
    """Fault B13, in sigmas of 1.67: it mimics noise of several channels but for its skewness."""
    scene = make_scene(380.0, snr=60.0)
    m = np.array(scene.stack.magnitude) + constant * S0 / 60.0
    result = assess(scene.with_magnitude(m))
    assert {"background-offset", "poor-fit", "noise-disagrees"} & codes(result, "caution")


@pytest.mark.parametrize("constant", [1.0, 2.0])
def test_a_constant_subtracted_and_cut_off_is_told(constant: float) -> None:
    """Fault B14."""
    scene = make_scene(150.0, snr=60.0)
    m = np.maximum(np.array(scene.stack.magnitude) - constant * S0 / 60.0, 0.0)
    assert codes(assess(scene.with_magnitude(m)), "caution")


@pytest.mark.parametrize("n_channels", [2, 4, 8, 32])
def test_sums_of_squares_are_no_constant(n_channels: int) -> None:
    result = assess(make_scene(200.0, snr=60.0, n_channels=n_channels))
    assert not result.has_caution


@pytest.mark.parametrize("share", [0.35, 0.4, 0.45])
def test_two_kinds_of_tissue_are_told(share: float) -> None:
    """Vessels in so many voxels that none is an outlier: the median would fall in silence."""
    rng = np.random.default_rng(6)
    rates = rng.gamma(1 / 0.3**2, 400.0 * 0.3**2, ORGAN_VOXELS)
    rates[: int(share * ORGAN_VOXELS)] = 10.0
    result = assess(make_scene(rates, snr=60.0))
    assert result.regions[0].summary.n_trimmed < 0.1 * ORGAN_VOXELS
    assert "uneven-iron" in codes(result, "caution")


def test_dark_tissue_tells_unknown_coils() -> None:
    """Eight channels, background masked: read as one channel, 20 mg/g would be far too low."""
    scene = make_scene(500.0, snr=60.0, n_channels=8)
    masked = np.where(scene.body[..., None], scene.stack.magnitude, 0.0)
    result = assess(scene.with_magnitude(masked))
    assert result.noise is not None
    assert result.noise.n_channels == 8
    assert result.regions[0].summary.r2star.value == pytest.approx(500.0, rel=0.02)


def test_a_result_that_hangs_on_unknown_coils_is_refused() -> None:
    """Three echoes, none of them dark, and a masked background leave the number open."""
    scene = make_scene(300.0, snr=20.0, times_ms=np.array([1.2, 2.4, 3.6]))
    masked = np.where(scene.body[..., None], scene.stack.magnitude, 0.0)
    with pytest.raises(StudyRefused) as refusal:
        assess(scene.with_magnitude(masked))
    assert refusal.value.findings[0].code == "channels-decide"
    known = assess(scene.with_magnitude(masked), n_channels=1)
    assert known.noise is not None
    assert known.noise.sigma == pytest.approx(S0 / 20.0, rel=0.05)


def test_a_few_values_below_zero_are_no_phase() -> None:
    """Interpolation undershoots at edges; the voxels are left out, the study is not refused."""
    scene = make_scene(300.0)
    m = np.array(scene.stack.magnitude)
    m[40:43, 30:33, 0, 11] = -0.5
    assert assess(scene.with_magnitude(m)).regions[0].summary.r2star.value == pytest.approx(
        300.0, rel=0.02
    )


def test_a_background_region_raises_no_caution() -> None:
    """It is what it says; its R2* has no meaning and no reader must be told so."""
    scene = make_scene(300.0)
    corner = np.zeros_like(scene.organ)
    corner[:10, :10] = True
    regions = [scene.region(), scene.region("background", mask=corner)]
    result = assess_study(scene.stack, regions, Method())
    assert not result.has_caution
