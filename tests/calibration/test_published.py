"""Every published curve gives its published numbers, and the files refuse what is wrong."""

from __future__ import annotations

import copy
import importlib.resources
import math
import re
import tomllib
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from liverfe.calibration import CalibrationCurve, curve, published_curves, read_curves
from liverfe.errors import UsageError
from liverfe.sources import cite, reference
from liverfe.units import lic_umol_per_g_from_mg_per_g, mg_per_g_from_umol_per_g
from tests.calibration import vectors

KEYS = (*vectors.CURVES_AT_1P5_T, *vectors.CURVES_NEAR_3_T)
VECTORS = [
    (key, r2star, lics[i])
    for table, keys in (
        (vectors.LIC_AT_1P5_T, vectors.CURVES_AT_1P5_T),
        (vectors.LIC_NEAR_3_T, vectors.CURVES_NEAR_3_T),
    )
    for r2star, lics in table.items()
    for i, key in enumerate(keys)
]
THRESHOLDS = [
    (key, lic, row[i])
    for lic, row in vectors.R2STAR_AT_THRESHOLD.items()
    for i, key in enumerate(KEYS)
]


def _document() -> dict[str, Any]:
    folder = importlib.resources.files("liverfe.calibration")
    return tomllib.loads(folder.joinpath("published.toml").read_text("utf-8"))


def test_the_shipping_curves_are_those_of_the_sheet_and_no_others() -> None:
    # Calibrations sheet, section 2.
    assert {c.key for c in published_curves()} == set(KEYS)


@pytest.mark.parametrize(("key", "r2star", "lic"), VECTORS)
def test_a_curve_gives_its_published_lic(key: str, r2star: float, lic: float) -> None:
    # Calibrations sheet, 9.3; tolerance as stated there (half a unit of the last printed digit).
    assert curve(key).lic_mg_per_g(float(r2star)) == pytest.approx(lic, abs=0.0005 + 1e-9)


@pytest.mark.parametrize(("r2star", "row"), vectors.LIC_NEAR_3_T.items())
def test_the_curve_published_in_micromoles_gives_its_published_number(
    r2star: float, row: tuple[float, ...]
) -> None:
    # Calibrations sheet, 9.3: µmol/g is the unit of the paper.
    lic = lic_umol_per_g_from_mg_per_g(curve("dassignies2018").lic_mg_per_g(float(r2star)))
    assert lic == pytest.approx(row[3], abs=0.005 + 1e-9)


@pytest.mark.parametrize(("key", "lic", "r2star"), THRESHOLDS)
def test_a_curve_reaches_a_threshold_at_its_published_r2star(
    key: str, lic: float, r2star: float
) -> None:
    # Calibrations sheet, 9.3, table of thresholds, printed to 0.1.
    assert curve(key).r2star_per_s(float(lic)) == pytest.approx(r2star, abs=0.05 + 1e-9)


@pytest.mark.parametrize(("lic", "row"), vectors.R2STAR_AT_THRESHOLD.items())
def test_thresholds_in_micromoles(lic: float, row: tuple[float, ...]) -> None:
    # Calibrations sheet, 9.3, last column.
    assert lic_umol_per_g_from_mg_per_g(float(lic)) == pytest.approx(row[8], abs=0.005 + 1e-9)


@pytest.mark.parametrize(("umol", "mg"), vectors.UMOL_PER_G_OF_MG_PER_G.items())
def test_conversion_of_published_concentrations(umol: float, mg: float) -> None:
    # Calibrations sheet, 4.1; each figure to its own printed digits.
    digits = 3 if round(mg, 2) != mg or mg == 2.010 else 2
    assert mg_per_g_from_umol_per_g(float(umol)) == pytest.approx(mg, abs=0.5 * 10.0**-digits)


@pytest.mark.parametrize(("t2star", "lic"), vectors.GARBOWSKI_LIC_AT_T2STAR_MS.items())
def test_the_power_curve_at_the_published_bounds(t2star: float, lic: float) -> None:
    # Calibrations sheet, 9.2.
    given_lic = curve("garbowski2014").lic_mg_per_g(1000.0 / t2star)
    assert given_lic == pytest.approx(lic, abs=0.0005 + 1e-9)


@pytest.mark.parametrize(("lic", "t2star"), vectors.GARBOWSKI_T2STAR_MS_AT_LIC.items())
def test_the_inverse_power_curve(lic: float, t2star: float) -> None:
    # Calibrations sheet, 9.2.
    r2star = curve("garbowski2014").r2star_per_s(float(lic))
    assert 1000.0 / r2star == pytest.approx(t2star, abs=0.0005 + 1e-9)


def test_the_other_printed_form_of_the_power_curve_agrees() -> None:
    # Calibrations sheet, section 2: 0.0290 R2*^1.014, its factor being 0.028996 to five digits.
    for r2star in (30.0, 300.0, 1000.0):
        other = 0.028996 * r2star**1.014
        assert curve("garbowski2014").lic_mg_per_g(r2star) == pytest.approx(other, rel=2e-5)


@pytest.mark.parametrize(("key", "r2star"), vectors.ZERO_CROSSING_R2STAR_PER_S.items())
def test_lic_is_negative_just_below_the_zero_of_a_curve_and_not_clamped(
    key: str, r2star: float
) -> None:
    # Calibrations sheet, section 1, item 6, printed to 0.1.
    assert curve(key).lic_mg_per_g(r2star - 0.1) < 0.0 < curve(key).lic_mg_per_g(r2star + 0.1)


@pytest.mark.parametrize("key", KEYS)
def test_each_coefficient_stands_in_the_equation_as_published(key: str) -> None:
    entry = curve(key)
    text = entry.equation.replace("−", "-").replace("- ", "-").replace("×10⁻²", "e-2")
    numbers = {float(found) for found in re.findall(r"-?\d+\.\d+(?:e-2)?", text)}
    assert set(entry.coefficients) <= numbers


@pytest.mark.parametrize(
    ("key", "lowest", "highest"),
    # The cohorts' LIC (mg/g) of the calibrations sheet, section 2; 130 µmol/g for dassignies2018.
    [
        ("wood2005", 1.33, 32.9),
        ("hankins2009", 0.6, 27.6),
        ("garbowski2014", None, 42.0),
        ("dassignies2018", None, 130 * 55.845 / 1000),
    ],
)
def test_the_studied_range_is_the_cohorts_lic_through_the_curve(
    key: str, lowest: float | None, highest: float
) -> None:
    entry = curve(key)
    assert entry.valid_r2star_per_s is not None
    low, high = entry.valid_r2star_per_s
    assert entry.r2star_per_s(highest) == pytest.approx(high, abs=1.0)
    assert low == 0.0 if lowest is None else low == pytest.approx(entry.r2star_per_s(lowest), abs=1)


def test_where_no_lic_range_is_established_none_is_stated() -> None:
    # Calibrations sheet, section 2, "Range in R2*".
    without = {c.key for c in published_curves() if c.valid_r2star_per_s is None}
    assert without == {
        "hernando2023_1p5",
        "hernando2023_2p89",
        "hernando2023_3p0",
        "henninger2015",
    }


def test_only_one_equation_counts_as_read_in_its_abstract() -> None:
    # Calibrations sheet, section 1, decision 2.
    assert [c.key for c in published_curves() if c.evidence == "abstract"] == ["hernando2023_1p5"]


def test_every_curve_cites_its_paper_and_its_origin() -> None:
    for entry in published_curves():
        assert entry.citation == cite(entry.reference_key) == reference(entry.reference_key).line
        assert entry.cohort
        assert entry.fit_model_of_origin
        assert entry.reference_method
        assert not entry.is_local


def test_every_worked_example_is_a_vector_of_the_sheet() -> None:
    known = {(key, float(r2star), lic) for key, r2star, lic in VECTORS}
    for entry in published_curves():
        assert entry.example is not None
        assert (entry.key, *entry.example) in known


r2stars = st.floats(min_value=0.0, max_value=5000.0)


@given(key=st.sampled_from(KEYS), first=r2stars, second=r2stars)
def test_more_r2star_never_means_less_iron(key: str, first: float, second: float) -> None:
    low, high = sorted((first, second))
    assert curve(key).lic_mg_per_g(low) <= curve(key).lic_mg_per_g(high)
    if high - low > 1e-6:
        assert curve(key).lic_mg_per_g(low) < curve(key).lic_mg_per_g(high)


@given(key=st.sampled_from(KEYS), r2star=st.floats(min_value=0.1, max_value=5000.0))
def test_the_inverse_undoes_the_curve(key: str, r2star: float) -> None:
    back = curve(key).r2star_per_s(curve(key).lic_mg_per_g(r2star))
    assert back == pytest.approx(r2star, rel=1e-9, abs=1e-9)


@pytest.mark.parametrize("key", KEYS)
def test_arrays_and_numbers_go_through_the_same_arithmetic(key: str) -> None:
    values = np.array([[-5.0, 0.0, 5.0], [50.0, 500.0, np.nan]])
    lics = curve(key).lic_mg_per_g(values)
    assert lics.shape == values.shape
    assert lics.dtype == np.float64
    for value, lic in zip(values.flat, lics.flat, strict=True):
        np.testing.assert_equal(curve(key).lic_mg_per_g(float(value)), float(lic))
    assert np.isnan(lics[1, 2])


def test_a_power_curve_has_no_lic_below_zero_and_none_at_zero_iron() -> None:
    power = curve("garbowski2014")
    assert math.isnan(power.lic_mg_per_g(-1.0))
    assert power.lic_mg_per_g(0.0) == 0.0
    assert power.r2star_per_s(0.0) == 0.0
    assert math.isnan(power.r2star_per_s(-1.0))


def test_an_unknown_key_names_the_nearest_and_all() -> None:
    with pytest.raises(UsageError, match="Did you mean 'hernando2023_1p5'") as caught:
        curve("hernando2023_15")
    assert all(key in str(caught.value) for key in KEYS)
    with pytest.raises(UsageError) as caught:
        curve("zzz")
    assert "Did you mean" not in str(caught.value)


def _with_first(**changes: object) -> dict[str, Any]:
    document = copy.deepcopy(_document())
    for key, value in changes.items():
        if value is None:
            del document["curve"][0][key]
        else:
            document["curve"][0][key] = value
    return document


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        # Faults sheet, E10: 0.2603 typed for 0.02603; the worked example does not come out.
        ({"slope": 0.2603}, "mistyped"),
        ({"intercept": 0.16}, "mistyped"),
        ({"published_unit": "umol/g"}, "mistyped"),
        ({"published_unit": "g/g"}, "published_unit"),
        ({"slope": "0.02603"}, "not a number"),
        ({"slope": True}, "not a number"),
        ({"slope": math.nan}, "not a finite number"),
        ({"slope": -2.603e-2}, "must rise"),
        ({"slope": None}, "slope is missing"),
        ({"form": "cubic"}, "form"),
        ({"field_strength_t": 0.0}, "field strength"),
        ({"evidence": "certain"}, "evidence"),
        ({"evidence_note": ""}, "is empty"),
        ({"cohort": 207}, "not text"),
        ({"cohort": "two\nlines"}, "one line"),
        ({"is_default": "yes"}, "true or false"),
        ({"slop": 0.1}, "unknown key 'slop'"),
        ({"valid_r2star_per_s": [40.0]}, r"\[low, high\]"),
        ({"valid_r2star_per_s": 40.0}, "list"),
        ({"valid_r2star_per_s": [900.0, 40.0]}, "ascending"),
        ({"example": 7.6}, "table"),
        ({"example": {"r2star_per_s": 300.0}}, "lic_mg_per_g is missing"),
        ({"example": {"r2star_per_s": 300.0, "lic_mg_per_g": 7.649, "x": 1}}, "unknown key"),
        ({"reference_key": "nobody1999"}, "no reference"),
        ({"key": "wood2005"}, "twice"),
        ({"field_strength_t": 3.0}, "twice"),
    ],
)
def test_a_wrong_table_is_refused_in_plain_words(changes: dict[str, object], says: str) -> None:
    with pytest.raises(ValueError, match=says) as caught:
        read_curves(_with_first(**changes))
    named = changes.get("key", "hernando2023_1p5")
    # "twice" speaks of two tables; every other message names the one at fault.
    assert "twice" in says or str(caught.value).startswith(f"curve {named!r}")
    assert str(caught.value).count("curve '") == 1


def test_the_file_as_it_ships_is_accepted_by_the_same_door() -> None:
    assert read_curves(_document()) == published_curves()


@pytest.mark.parametrize("document", [{}, {"schema": 2}, {"schema": 1}, {"schema": 1, "curve": []}])
def test_a_document_of_another_kind_is_refused(document: dict[str, Any]) -> None:
    with pytest.raises(ValueError, match=r"schema|holds no"):
        read_curves(document)


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        ({"coefficients": (math.inf, 0.0)}, "finite"),
        ({"form": "power", "coefficients": (31.94, 1.014)}, "must rise"),
        ({"form": "spline"}, "form"),
        ({"published_unit": "ppm"}, "unit"),
        ({"field_strength_t": math.nan}, "field strength"),
    ],
)
def test_a_curve_is_valid_once_born(changes: dict[str, Any], says: str) -> None:
    good = curve("wood2005")
    facts = {name: getattr(good, name) for name in CalibrationCurve.__dataclass_fields__}
    with pytest.raises(ValueError, match=says):
        CalibrationCurve(**{**facts, **changes})


def test_a_fingerprint_moves_with_every_number_and_with_nothing_else() -> None:
    good = curve("wood2005")
    facts = {name: getattr(good, name) for name in CalibrationCurve.__dataclass_fields__}
    prints = {good.fingerprint}
    for change in (
        {"coefficients": (0.0255, 0.202)},
        {"coefficients": (0.0254, 0.203)},
        {"field_strength_t": 3.0},
        {"published_unit": "umol/g"},
        {"key": "wood2006"},
    ):
        prints.add(CalibrationCurve(**{**facts, **change}).fingerprint)
    assert len(prints) == 6
    assert CalibrationCurve(**{**facts, "cohort": "other"}).fingerprint == good.fingerprint
