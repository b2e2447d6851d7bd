"""A site's own curve is checked harder than a published one, and marked."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path
from typing import Any

import pytest

from liverfe.calibration import (
    choose_curve,
    curve,
    curves_for_field,
    default_curve,
    published_curves,
    site_curve,
)
from liverfe.errors import StudyRefused, UsageError

OWN: dict[str, Any] = {
    "key": "example_site_1p5",
    "citation": "Example site (synthetic), document 12",
    "field_strength_t": 1.5,
    "form": "linear",
    "equation": "LIC = 0.0270 R2* - 0.10",
    "slope": 0.0270,
    "intercept": -0.10,
    "published_unit": "mg/g",
    "cohort": "40 patients",
    "reference_method": "liver biopsy, dry weight",
    "fit_model_of_origin": "Rician maximum likelihood",
    "example": {"r2star_per_s": 300.0, "lic_mg_per_g": 8.0},
}


def _own(**changes: Any) -> dict[str, Any]:
    merged = {**OWN, **changes}
    return {key: value for key, value in merged.items() if value is not None}


def _with_true_example(**changes: Any) -> dict[str, Any]:
    """A curve whose example was worked out from the wrong coefficients, so it hides nothing."""
    values = _own(**changes)
    lic = (values["slope"] * 300.0 + values["intercept"]) * (
        0.055845 if values["published_unit"] == "umol/g" else 1.0
    )
    return {**values, "example": {"r2star_per_s": 300.0, "lic_mg_per_g": round(lic, 6)}}


def test_a_site_may_bring_its_own_curve_and_it_is_marked() -> None:
    own = site_curve(OWN)
    assert own.is_local
    assert own.evidence == "local"
    assert not own.is_default
    assert own.citation == OWN["citation"]
    assert own.noise_handling == "unknown"
    # 0.0270 * 500 - 0.10, by hand
    assert own.lic_mg_per_g(500.0) == pytest.approx(13.4)


def test_it_is_used_only_where_it_is_named_and_then_with_a_caution() -> None:
    own = site_curve(OWN)
    assert choose_curve(1.5, site_curves=(own,)) == (default_curve(1.5), ())
    chosen, findings = choose_curve(1.5, own.key, site_curves=(own,))
    assert chosen is own
    assert [(f.code, f.level) for f in findings] == [("local-curve", "caution")]
    assert "LOCAL" in findings[0].text
    assert own.fingerprint in findings[0].text
    assert curves_for_field(1.5, site_curves=(own,))[-1] is own


def test_it_holds_at_its_own_field_only() -> None:
    own = site_curve(OWN)
    with pytest.raises(StudyRefused):
        choose_curve(3.0, own.key, site_curves=(own,))
    assert choose_curve(None, own.key, site_curves=(own,))[0] is None


def test_a_misspelt_own_key_is_found_too() -> None:
    own = site_curve(OWN)
    with pytest.raises(UsageError, match="Did you mean 'example_site_1p5'"):
        choose_curve(1.5, "example_site_15", site_curves=(own,))


def test_two_own_curves_of_one_key_are_refused() -> None:
    own = site_curve(OWN)
    with pytest.raises(UsageError, match="given twice"):
        choose_curve(1.5, own.key, site_curves=(own, own))


def test_a_decimal_slip_is_caught_by_the_example() -> None:
    # Faults sheet, E10: 0.2603 typed for 0.02603.
    with pytest.raises(UsageError, match="mistyped"):
        site_curve(_own(slope=0.270))


@pytest.mark.parametrize(
    "changes",
    [
        {"slope": 0.2603, "intercept": -0.16},  # E10: a decimal slip
        {"slope": 0.002603, "intercept": -0.016},
        {"slope": 0.02603 * 17.9067, "intercept": -2.9},  # E6: µmol/g stated as mg/g
        {"slope": 0.02603, "intercept": -0.16, "published_unit": "umol/g"},  # and the reverse
        {"slope": 0.02603 / 3.33, "intercept": -0.05},  # E7: wet weight
        {"slope": 0.02603, "intercept": 12.0},
        {"slope": 0.02603, "intercept": -5.0},
    ],
)
def test_a_curve_far_from_all_published_ones_is_refused_with_numbers(
    changes: dict[str, Any],
) -> None:
    # The example agrees with the wrong coefficients, so only the published curves can tell.
    with pytest.raises(UsageError, match="the published curves give") as caught:
        site_curve(_with_true_example(**changes))
    assert len(re.findall(r"\d+\.\d\d", str(caught.value))) >= 5


def test_a_1p5_t_curve_passes_for_3_t_only_as_far_as_published_curves_differ() -> None:
    # The ratio of two fields is 1.93 (calibrations sheet, 3.1) and the published 3 T curves differ
    # by 1.30 themselves, so this check cannot tell; the field of the images does (E1).
    own = site_curve(_own(field_strength_t=3.0, key="example_site_3p0"))
    with pytest.raises(StudyRefused):
        choose_curve(1.5, own.key, site_curves=(own,))


@pytest.mark.parametrize("entry", published_curves(), ids=lambda c: c.key)
def test_every_published_curve_would_pass_as_an_own_one(entry: Any) -> None:
    names = ("slope", "intercept") if entry.form == "linear" else ("factor", "exponent")
    assert entry.example is not None
    own = site_curve(
        _own(
            form=entry.form,
            **{
                "slope": None,
                "intercept": None,
                **dict(zip(names, entry.coefficients, strict=True)),
            },
            field_strength_t=entry.field_strength_t,
            published_unit=entry.published_unit,
            example={
                "r2star_per_s": entry.example[0],
                "lic_mg_per_g": entry.lic_mg_per_g(entry.example[0]),
            },
        )
    )
    assert own.lic_mg_per_g(475.0) == entry.lic_mg_per_g(475.0)


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        ({"key": "wood2005"}, "a published curve has this key"),
        ({"key": "A b"}, "lower-case"),
        ({"key": "=cmd"}, "lower-case"),
        ({"key": "x" * 41}, "lower-case"),
        ({"key": 7}, "not text"),
        ({"key": None}, "key is missing"),
        ({"citation": None}, "citation is missing"),
        ({"citation": "  "}, "citation is empty"),
        ({"citation": "x" * 301}, "300"),
        ({"example": None}, "example is missing"),
        ({"slope": -0.027}, "must rise"),
        ({"slope": 0.0}, "must rise"),
        ({"published_unit": "mg/g wet"}, "published_unit"),
        ({"noise_handling": "magic"}, "noise_handling"),
        ({"is_default": True}, "unknown key 'is_default'"),
        ({"factor": 31.94}, "unknown key 'factor'"),
        ({"no_published_curve": True}, "there are published curves at 1.5 T"),
        ({"no_published_curve": "yes"}, "true or false"),
        ({"field_strength_t": 0.55}, "no curve is published at 0.55 T"),
        ({"field_strength_t": -1.5}, "field strength"),
    ],
)
def test_a_wrong_file_is_refused_in_plain_words(changes: dict[str, Any], says: str) -> None:
    with pytest.raises(UsageError, match=re.escape(says)) as caught:
        site_curve(_own(**changes))
    assert str(caught.value).startswith("own curve")


# 0.02603 * 1.5 / 0.55 = 0.0710 mg/g per 1/s (calibrations sheet, 3.1).
AT_0P55 = {
    "key": "example_site_0p55",
    "field_strength_t": 0.55,
    "slope": 0.0710,
    "intercept": -0.16,
    "example": {"r2star_per_s": 100.0, "lic_mg_per_g": 6.94},
    "no_published_curve": True,
}


def test_a_field_without_published_curves_wants_an_explicit_word() -> None:
    own = site_curve(_own(**AT_0P55))
    chosen, findings = choose_curve(0.55, own.key, site_curves=(own,))
    assert chosen is own
    assert [(f.code, f.level) for f in findings] == [
        ("local-curve", "caution"),
        ("local-curve-alone", "caution"),
    ]
    # Never by itself, even where it is the only one.
    assert choose_curve(0.55, site_curves=(own,))[0] is None


def test_even_there_a_wrong_unit_is_caught() -> None:
    slip = {"slope": 0.710, "example": {"r2star_per_s": 100.0, "lic_mg_per_g": 70.84}}
    with pytest.raises(UsageError, match=r"scaled from 1\.5 T"):
        site_curve(_own(**{**AT_0P55, **slip}))


def test_the_example_of_the_documentation_works(repository: Path) -> None:
    text = (repository / "docs" / "howto" / "own-curve.md").read_text("utf-8")
    block = re.search(r"```toml\n(key = .*?)```", text, flags=re.DOTALL)
    assert block is not None
    own = site_curve(tomllib.loads(block[1]))
    assert own.key == "example_site_1p5"
    assert own.valid_r2star_per_s == (40.0, 930.0)
    assert own.lic_mg_per_g(300.0) != curve("hernando2023_1p5").lic_mg_per_g(300.0)
