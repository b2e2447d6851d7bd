"""A curve holds at its own field only."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from liverfe.calibration import (
    choose_curve,
    curve,
    curves_for_field,
    default_curve,
    field_key_t,
    fit_model_findings,
    holds_at,
    published_curves,
)
from liverfe.echoes import settle_field_strength
from liverfe.errors import StudyRefused, UsageError
from liverfe.study import ESTIMATORS
from tests.calibration import vectors


@pytest.mark.parametrize(
    ("field", "key"),
    [
        # Calibrations sheet, decisions 1 and 4: 1.5, 2.89 and 3.0 T are kept apart, nothing is
        # rounded; 0.55 and 7 T have no published curve (section 3.1).
        (1.494, 1.5),
        (1.5, 1.5),
        (1.45, 1.5),
        (1.55, 1.5),
        (1.449, None),
        (1.551, None),
        (2.859, None),
        (2.86, 2.89),
        (2.89, 2.89),
        (2.895, 2.89),
        (2.93, 2.89),
        (2.94, None),
        (2.95, 3.0),
        (3.0, 3.0),
        (3.001, 3.0),
        (3.05, 3.0),
        (3.06, None),
        (0.55, None),
        (1.0, None),
        (7.0, None),
        (0.0, None),
        (-1.5, None),
        (math.nan, None),
        (math.inf, None),
        (None, None),
    ],
)
def test_a_field_counts_as_its_own_and_nothing_is_rounded(
    field: float | None, key: float | None
) -> None:
    assert field_key_t(field) == key
    defaults = {1.5: "hernando2023_1p5", 2.89: "hernando2023_2p89", 3.0: "hernando2023_3p0"}
    default = default_curve(field)
    assert (default.key if default else None) == (None if key is None else defaults[key])


def test_every_field_has_exactly_its_published_curves_the_default_first() -> None:
    at_1p5 = [c.key for c in curves_for_field(1.494)]
    assert set(at_1p5) == set(vectors.CURVES_AT_1P5_T)
    assert at_1p5[0] == "hernando2023_1p5"
    assert [c.key for c in curves_for_field(2.895)] == ["hernando2023_2p89"]
    # The sheet gives dassignies2018 for "3 T" and says nothing of 2.89 T.
    assert [c.key for c in curves_for_field(3.0)] == ["hernando2023_3p0", "dassignies2018"]
    assert curves_for_field(0.55) == curves_for_field(None) == curves_for_field(math.nan) == ()


def test_the_imaging_frequency_decides_between_3_and_2p89_t() -> None:
    # Calibrations sheet, decision 4: 2.89 T is 123.05 MHz, 3.0 T is 127.73 MHz.
    for frequency, key in ((123.05, "hernando2023_2p89"), (127.73, "hernando2023_3p0")):
        field, _ = settle_field_strength(3.0, frequency)
        chosen, findings = choose_curve(field, imaging_frequency_mhz=frequency)
        assert chosen is curve(key)
        assert findings == ()


def test_3_t_without_a_frequency_is_noted_and_1p5_t_is_not() -> None:
    chosen, findings = choose_curve(3.0)
    assert chosen is not None
    assert [(f.code, f.level) for f in findings] == [("field-not-confirmed", "note")]
    assert choose_curve(1.5)[1] == ()
    assert choose_curve(2.89)[1] == ()
    # A frequency that says 2.89 T does not confirm 3.0 T.
    assert [f.code for f in choose_curve(3.0, imaging_frequency_mhz=123.05)[1]] == [
        "field-not-confirmed"
    ]


def test_2p89_and_3p0_t_differ_by_the_four_per_cent_that_the_words_state() -> None:
    at_2p89, at_3p0 = (curve(f"hernando2023_{f}").lic_mg_per_g(500.0) for f in ("2p89", "3p0"))
    assert 1.0 - at_3p0 / at_2p89 == pytest.approx(0.04, abs=0.005)


def test_an_unknown_field_gets_no_curve_whatever_was_asked() -> None:
    for key in (None, "wood2005"):
        chosen, findings = choose_curve(None, key)
        assert chosen is None
        assert [(f.code, f.level) for f in findings] == [("field-unknown", "caution")]


@pytest.mark.parametrize("field", [0.55, 2.94, 7.0])
def test_a_field_without_a_curve_gets_none(field: float) -> None:
    # Faults sheet, A19.
    chosen, findings = choose_curve(field)
    assert chosen is None
    assert [(f.code, f.level) for f in findings] == [("no-curve-for-field", "caution")]
    assert f"{field:g} T" in findings[0].text
    assert "1.5, 2.89, 3 T" in findings[0].remedy


@pytest.mark.parametrize(
    ("field", "key"),
    [
        (3.0, "hernando2023_1p5"),  # faults sheet, E1
        (1.5, "hernando2023_3p0"),  # faults sheet, E2
        (2.895, "hernando2023_3p0"),
        (3.0, "hernando2023_2p89"),
        (2.895, "dassignies2018"),
        (0.55, "hernando2023_1p5"),
    ],
)
def test_a_curve_of_another_field_is_refused(field: float, key: str) -> None:
    with pytest.raises(StudyRefused) as caught:
        choose_curve(field, key)
    (finding,) = caught.value.findings
    assert (finding.code, finding.level) == ("curve-of-another-field", "stop")
    assert key in finding.text
    for other in curves_for_field(field):
        assert other.key in finding.remedy


def test_the_words_of_the_refusal_state_the_true_size_of_the_fault() -> None:
    # Faults sheet, E1: 7 mg/g at 3 T read by the 1.5 T line; E2: the reverse, by field ratio 1.94.
    at_1p5, at_3p0 = curve("hernando2023_1p5"), curve("hernando2023_3p0")
    # E1 was computed with R2*(3 T) = 437, Storey's conversion of the 1.5 T bound (section 9.2).
    assert at_1p5.lic_mg_per_g(437.0) == pytest.approx(11.2, abs=0.05)
    assert at_3p0.lic_mg_per_g(at_1p5.r2star_per_s(7.0)) == pytest.approx(3.6, abs=0.15)


def test_a_named_curve_of_the_right_field_is_taken() -> None:
    for key in vectors.CURVES_AT_1P5_T:
        assert choose_curve(1.5, key) == (curve(key), ())
    assert choose_curve(3.0, "dassignies2018", imaging_frequency_mhz=127.73) == (
        curve("dassignies2018"),
        (),
    )


def test_a_curve_that_does_not_exist_is_wrong_usage_not_a_fault_of_the_study() -> None:
    with pytest.raises(UsageError, match="Did you mean 'wood2005'"):
        choose_curve(1.5, "wod2005")


def test_a_clean_study_gets_a_curve_without_a_word() -> None:
    # Contract: marks that are always there are not read.
    for entry in published_curves():
        frequency = entry.field_strength_t * 42.577478518  # CODATA 2018
        _, findings = choose_curve(
            entry.field_strength_t, entry.key, imaging_frequency_mhz=frequency
        )
        assert findings == ()


def test_two_fields_without_published_curves_are_the_same_only_within_rounding() -> None:
    at_7 = replace(curve("wood2005"), key="own", field_strength_t=7.0, is_local=True)
    assert holds_at(at_7, 6.98)  # 297.2 MHz, what "7 T" magnets run at
    assert not holds_at(at_7, 6.5)
    assert not holds_at(at_7, 3.0)
    assert not holds_at(curve("wood2005"), 7.0)


def test_every_estimator_is_known_to_treat_the_noise_floor_somehow() -> None:
    for estimator in ESTIMATORS:
        fit_model_findings(curve("wood2005"), estimator)
    with pytest.raises(ValueError, match="unknown estimator"):
        fit_model_findings(curve("wood2005"), "guess")


def test_a_fit_model_other_than_the_curves_is_a_note() -> None:
    # Faults sheet, E5: a mismatch is a note.
    (finding,) = fit_model_findings(curve("wood2005"), "rician-ml")
    assert (finding.code, finding.level) == ("fit-model-differs", "note")
    assert "offset" in finding.text
    assert fit_model_findings(curve("wood2005"), "offset") == ()
    assert fit_model_findings(curve("garbowski2014"), "truncation") == ()
    assert fit_model_findings(curve("hernando2023_1p5"), "rician-ml") == ()
    # Where the paper's own is not established nothing can be said to differ.
    assert fit_model_findings(curve("hankins2009"), "rician-ml") == ()
