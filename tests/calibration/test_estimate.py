"""What a region's R2* becomes: value, interval, qualifier, band and doubts."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from liverfe.calibration import (
    IronEstimate,
    curve,
    estimate_iron,
    lic_map,
    other_estimates,
    published_curves,
)
from liverfe.errors import UsageError
from tests.calibration import vectors
from tests.calibration.summaries import region_of

BANDS = "pmc8528353"


def _codes(estimate: IronEstimate) -> list[str]:
    return [finding.code for finding in estimate.findings]


def test_value_interval_and_limits_go_through_the_curve() -> None:
    # Calibrations sheet, 9.3, hernando2023_1p5: 300 -> 7.649, 224 -> 5.671, 475 -> 12.204,
    # 40 -> 0.881, 1000 -> 25.870; 1 mg/g = 17.9067 µmol/g (4.1).
    summary = region_of(300.0, 224.0, 475.0, limits=(40.0, 1000.0))
    estimate = estimate_iron(summary, curve("hernando2023_1p5"), BANDS)
    assert estimate.curve_key == "hernando2023_1p5"
    assert estimate.qualifier == "="
    assert estimate.value_mg_per_g == pytest.approx(7.649, abs=0.0005)
    assert estimate.value_umol_per_g == pytest.approx(7.649 * 17.9067, abs=0.01)
    assert estimate.low_mg_per_g == pytest.approx(5.671, abs=0.0005 + 1e-9)
    assert estimate.high_mg_per_g == pytest.approx(12.204, abs=0.0005)
    assert estimate.limits_mg_per_g == pytest.approx((0.881, 25.870), abs=0.0005)
    assert estimate.band_set == BANDS
    assert estimate.band is not None
    assert (estimate.band.name, estimate.band.low_mg_per_g) == ("moderate", 7.0)


def test_a_clean_region_carries_no_caution() -> None:
    # Contract: a clean study carries no caution. Normal liver: obrzut2020, 28.72 ± 2.69 1/s.
    for value in (28.72, 150.0, 400.0):
        for entry in published_curves():
            if entry.field_strength_t == 1.5:
                estimate = estimate_iron(region_of(value, value - 2, value + 2), entry, BANDS)
                assert all(finding.level == "note" for finding in estimate.findings)
    estimate = estimate_iron(region_of(28.72, 26.0, 31.4), curve("hernando2023_1p5"), BANDS)
    assert estimate.findings == ()
    # Faults sheet, E9: normal R2* 28.7 1/s at 1.5 T is 0.59 mg/g.
    assert estimate.value_mg_per_g == pytest.approx(0.59, abs=0.005)


def test_beyond_the_upper_limit_the_lic_is_the_limit_and_open_above() -> None:
    # Faults sheet, A1: CENSOR ">limit"; 9.3: 500 -> 12.855.
    summary = region_of(500.0, 500.0, None, ">", limits=(0.0, 500.0))
    estimate = estimate_iron(summary, curve("hernando2023_1p5"), BANDS)
    assert estimate.qualifier == ">"
    assert estimate.value_mg_per_g == estimate.low_mg_per_g == pytest.approx(12.855, abs=0.0005)
    assert estimate.high_mg_per_g is None
    assert estimate.band is None  # moderate or severe


def test_a_limit_above_the_last_threshold_settles_the_band() -> None:
    summary = region_of(800.0, 800.0, None, ">")
    estimate = estimate_iron(summary, curve("hernando2023_1p5"), BANDS)
    assert estimate.band is not None
    assert estimate.band.name == "severe"


def test_below_the_lower_limit_the_lic_is_the_limit_and_open_below() -> None:
    # 9.3: 50 -> 1.142.
    summary = region_of(50.0, None, 50.0, "<", limits=(50.0, 500.0))
    estimate = estimate_iron(summary, curve("hernando2023_1p5"), BANDS)
    assert estimate.qualifier == "<"
    assert estimate.value_mg_per_g == estimate.high_mg_per_g == pytest.approx(1.142, abs=0.0005)
    assert estimate.low_mg_per_g is None
    assert estimate.band is not None
    assert estimate.band.name == "normal"


@pytest.mark.parametrize(
    ("low", "high", "limits", "bound"),
    [
        # The interval's upper end: -0.16 + 0.02603 * 20 = 0.3606.
        (1.0, 20.0, (0.0, 500.0), 0.3606),
        # It is below zero too: the lower reportable limit, -0.16 + 0.02603 * 40 = 0.8812.
        (1.0, 5.0, (40.0, 500.0), 0.8812),
        # Neither: the lower end of normal LIC (olivieri1997).
        (1.0, 5.0, (0.0, 500.0), 0.6),
        (None, None, (0.0, 500.0), 0.6),
        # -0.16 + 0.02603 * 6.2 = 0.0014 would be printed as "below 0.00".
        (1.0, 6.2, (0.0, 500.0), 0.6),
    ],
)
def test_a_lic_at_or_below_zero_becomes_an_upper_bound(
    low: float | None, high: float | None, limits: tuple[float, float], bound: float
) -> None:
    # Faults sheet, E9: CENSOR "<x (normal range)", never a minus sign.
    summary = region_of(3.0, low, high, limits=limits)
    estimate = estimate_iron(summary, curve("hernando2023_1p5"), BANDS)
    assert estimate.qualifier == "<"
    assert estimate.value_mg_per_g == estimate.high_mg_per_g == pytest.approx(bound, abs=1e-9)
    assert estimate.low_mg_per_g is None
    assert estimate.band is not None
    assert estimate.band.name == "normal"
    assert _codes(estimate) == ["lic-not-above-zero"]
    assert estimate.findings[0].level == "caution"


def test_t2star_typed_as_r2star_is_not_reported_as_a_lic() -> None:
    # Faults sheet, E8: T2* 5 ms taken for R2* gives -0.03 in place of 5.05.
    assert curve("hernando2023_1p5").lic_mg_per_g(5.0) == pytest.approx(-0.03, abs=0.005)
    assert curve("hernando2023_1p5").lic_mg_per_g(1000 / 5.0) == pytest.approx(5.05, abs=0.005)
    estimate = estimate_iron(region_of(5.0, 4.0, 6.0), curve("hernando2023_1p5"), BANDS)
    assert estimate.qualifier == "<"
    assert "T2* in ms" in estimate.findings[0].remedy


def test_a_negative_r2star_by_a_power_curve_is_an_upper_bound_not_nan() -> None:
    summary = region_of(-1.0, -3.0, 10.0)
    estimate = estimate_iron(summary, curve("garbowski2014"), BANDS)
    assert estimate.qualifier == "<"
    # 0.028996 * 10 ** 1.014 (calibrations sheet, section 2)
    assert estimate.value_mg_per_g == pytest.approx(0.028996 * 10**1.014, rel=1e-4)
    assert "nan" not in estimate.findings[0].text


def test_ends_of_an_interval_below_zero_are_zero() -> None:
    summary = region_of(8.0, 2.0, 20.0, limits=(1.0, 3.0))
    estimate = estimate_iron(summary, curve("hernando2023_1p5"), BANDS)
    assert estimate.qualifier == "="
    assert estimate.low_mg_per_g == 0.0
    assert estimate.limits_mg_per_g == (0.0, 0.0)


def test_an_upper_limit_below_the_zero_of_the_curve_says_above_zero() -> None:
    summary = region_of(5.0, 5.0, None, ">", limits=(0.0, 5.0))
    estimate = estimate_iron(summary, curve("hernando2023_1p5"), BANDS)
    assert (estimate.qualifier, estimate.value_mg_per_g) == (">", 0.0)
    assert estimate.band is None


@given(
    key=st.sampled_from([c.key for c in published_curves()]),
    ends=st.tuples(*[st.floats(min_value=-50.0, max_value=4000.0)] * 3),
    qualifier=st.sampled_from("=<>"),
    limits=st.tuples(
        st.floats(min_value=0.0, max_value=100.0), st.floats(min_value=101.0, max_value=4000.0)
    ),
)
def test_no_estimate_is_ever_negative_unordered_or_without_a_number(
    key: str, ends: tuple[float, ...], qualifier: Any, limits: tuple[float, float]
) -> None:
    low, value, high = sorted(ends)
    summary = region_of(
        value,
        None if qualifier == "<" else low,
        None if qualifier == ">" else high,
        qualifier,
        limits=limits,
    )
    estimate = estimate_iron(summary, curve(key), BANDS)
    numbers = [
        estimate.value_mg_per_g,
        estimate.value_umol_per_g,
        *(end for end in (estimate.low_mg_per_g, estimate.high_mg_per_g) if end is not None),
        *estimate.limits_mg_per_g,
    ]
    assert all(math.isfinite(number) and number >= 0.0 for number in numbers)
    if estimate.qualifier != ">":
        assert estimate.value_mg_per_g > 0.0
    if estimate.low_mg_per_g is not None:
        assert estimate.low_mg_per_g <= estimate.value_mg_per_g
    if estimate.high_mg_per_g is not None:
        assert estimate.value_mg_per_g <= estimate.high_mg_per_g
    assert (estimate.low_mg_per_g is None) == (estimate.qualifier == "<")
    assert (estimate.high_mg_per_g is None) == (estimate.qualifier == ">")
    # A measured value stays one, or becomes an upper bound; a bound never becomes a value.
    assert estimate.qualifier == qualifier or (qualifier, estimate.qualifier) == ("=", "<")


@pytest.mark.parametrize(
    ("key", "r2star", "codes"),
    [
        # Faults sheet, E3; ranges of the calibrations sheet, section 2.
        ("wood2005", 1288.0, ["outside-calibrated-range"]),
        ("wood2005", 1287.0, []),
        ("wood2005", 44.0, []),
        ("wood2005", 43.0, ["below-calibrated-range"]),
        ("dassignies2018", 418.0, ["outside-calibrated-range"]),
        ("garbowski2014", 1311.0, ["outside-calibrated-range"]),
        ("garbowski2014", 20.0, []),
        # Not established, so nothing can be said to lie outside.
        ("hernando2023_1p5", 2500.0, []),
    ],
)
def test_r2star_outside_the_studied_range_is_said(
    key: str, r2star: float, codes: list[str]
) -> None:
    estimate = estimate_iron(region_of(r2star), curve(key), BANDS)
    assert [code for code in _codes(estimate) if code.endswith("-range")] == codes


def test_a_limit_above_the_studied_range_is_an_extrapolation_too() -> None:
    above = estimate_iron(region_of(1400.0, 1400.0, None, ">"), curve("wood2005"), BANDS)
    assert "outside-calibrated-range" in _codes(above)
    assert estimate_iron(
        region_of(1400.0, None, 1400.0, "<"), curve("wood2005"), BANDS
    ).findings == ()  # fmt: skip
    assert "below-calibrated-range" not in _codes(
        estimate_iron(region_of(20.0, 20.0, None, ">"), curve("wood2005"), BANDS)
    )


def test_the_words_about_extrapolation_state_its_true_size() -> None:
    # Faults sheet, E3 and E4: 1200 1/s is 31 or 38 mg/g, 475 is 12.2 or 15.0.
    linear, power = (curve(key) for key in ("hernando2023_1p5", "garbowski2014"))
    assert power.lic_mg_per_g(1200.0) - linear.lic_mg_per_g(1200.0) == pytest.approx(7, abs=0.5)
    lics = [curve(key).lic_mg_per_g(28.72) for key in vectors.CURVES_AT_1P5_T]
    assert max(lics) - min(lics) == pytest.approx(0.6, abs=0.05)


def test_an_interval_over_a_threshold_is_noted_with_the_threshold() -> None:
    # hernando2023_1p5 reaches 7 mg/g at 275.1 1/s (9.3).
    near = estimate_iron(region_of(272.0, 265.0, 280.0), curve("hernando2023_1p5"), BANDS)
    (finding,) = [f for f in near.findings if f.code == "near-band-threshold"]
    assert finding.level == "note"
    assert "threshold 7 mg/g" in finding.text
    assert BANDS in finding.text
    far = estimate_iron(region_of(272.0, 270.0, 274.0), curve("hernando2023_1p5"), BANDS)
    assert "near-band-threshold" not in _codes(far)


def test_a_band_that_another_curve_would_change_is_noted() -> None:
    # Calibrations sheet, 9.3: R2* 70 is normal by hernando (1.66), above 1.8 by wood (1.98) and
    # garbowski (2.15).
    estimate = estimate_iron(region_of(70.0), curve("hernando2023_1p5"), "guglielmo2023")
    assert estimate.band is not None
    assert estimate.band.name == "normal"
    (finding,) = [f for f in estimate.findings if f.code == "band-depends-on-curve"]
    assert finding.level == "note"
    for words in (
        "hernando2023_1p5 it is normal (1.66 mg/g)",
        "wood2005 mild (1.98 mg/g)",
        "garbowski2014 mild (2.15 mg/g)",
    ):
        assert words in finding.text
    # Hankins gives 1.51 there, normal as well, so it is not listed.
    assert "hankins2009" not in finding.text


def test_a_band_that_all_curves_agree_on_is_not_noted() -> None:
    # 9.3 at 300 1/s: 7.5 to 9.4 mg/g, moderate by all.
    estimate = estimate_iron(region_of(300.0), curve("hernando2023_1p5"), BANDS)
    assert "band-depends-on-curve" not in _codes(estimate)


def test_a_censored_band_may_depend_on_the_curve_too() -> None:
    # 9.3 at 500 1/s: > 12.855 (moderate or severe) by hernando, > 15.816 (severe) by garbowski.
    estimate = estimate_iron(region_of(500.0, 500.0, None, ">"), curve("hernando2023_1p5"), BANDS)
    (finding,) = [f for f in estimate.findings if f.code == "band-depends-on-curve"]
    assert "not one band alone (> 12.8" in finding.text
    assert "garbowski2014 severe (> 15.8" in finding.text


def test_at_2p89_t_there_is_no_other_curve_to_differ() -> None:
    estimate = estimate_iron(region_of(140.0), curve("hernando2023_2p89"), BANDS)
    assert _codes(estimate) == []
    assert other_estimates(region_of(140.0), curve("hernando2023_2p89"), BANDS, 2.895) == ()


def test_the_other_curves_of_the_field_give_their_own_numbers_unmixed() -> None:
    # Calibrations sheet, 9.3 at 475 1/s; decision 3: never average or mix curves.
    others = other_estimates(region_of(475.0), curve("wood2005"), BANDS, 1.494)
    wanted = dict(zip(vectors.CURVES_AT_1P5_T, vectors.LIC_AT_1P5_T[475], strict=True))
    del wanted["wood2005"]
    assert {o.curve_key: round(o.value_mg_per_g, 3) for o in others} == wanted


def test_a_sites_own_curve_can_stand_among_the_others() -> None:
    own = replace(curve("wood2005"), key="own", is_local=True)
    others = other_estimates(
        region_of(475.0), curve("hernando2023_1p5"), BANDS, 1.5, site_curves=(own,)
    )
    assert others[-1].curve_key == "own"


def test_an_unknown_band_set_is_wrong_usage() -> None:
    with pytest.raises(UsageError, match="There are: pmc8528353"):
        estimate_iron(region_of(300.0), curve("wood2005"), "mine")


def test_a_region_without_r2star_is_not_given_a_lic() -> None:
    with pytest.raises(ValueError, match="no R2\\*"):
        estimate_iron(region_of(math.nan), curve("wood2005"), BANDS)


def test_a_lic_map_keeps_nan_and_the_arithmetic_of_the_curve() -> None:
    r2star = np.array([[[300.0, np.nan], [2.0, 1000.0]]], dtype=np.float32)
    lic = lic_map(r2star, curve("hernando2023_1p5"))
    assert lic.dtype == np.float32
    assert lic.shape == r2star.shape
    # 9.3 at 300 and 1000; -0.16 + 0.02603 * 2 is negative and stays so.
    wanted = [[[7.649, np.nan], [-0.108, 25.870]]]
    np.testing.assert_allclose(lic, wanted, atol=0.0005)
    assert np.isnan(lic_map(r2star, curve("garbowski2014"))[0, 0, 1])
