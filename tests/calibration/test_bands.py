"""Bands bear the names and thresholds of their sources, and each LIC lies in exactly one."""

from __future__ import annotations

import copy
import importlib.resources
import tomllib
from dataclasses import replace
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from liverfe.calibration import Band, band_set, band_sets, curve, read_band_sets
from liverfe.errors import UsageError
from liverfe.study import Method
from liverfe.wording.calibration import UNNAMED_BAND
from tests.calibration import vectors

SETS = ("pmc8528353", "guglielmo2023", "olivieri1997", "stpierre2005")


def _document() -> dict[str, Any]:
    folder = importlib.resources.files("liverfe.calibration")
    return tomllib.loads(folder.joinpath("bands.toml").read_text("utf-8"))


def test_the_shipping_sets_are_those_of_the_sheet_and_the_houses_own_stands_first() -> None:
    # Calibrations sheet, section 5; contract: --bands defaults to pmc8528353.
    assert tuple(s.key for s in band_sets()) == SETS
    assert Method().bands == "pmc8528353"


@pytest.mark.parametrize(
    ("key", "thresholds"),
    [
        # Calibrations sheet, section 5.
        ("pmc8528353", (2.0, 7.0, 15.0)),
        ("guglielmo2023", (1.8, 3.2, 7.0, 15.0)),
        ("olivieri1997", (0.6, 1.2, 3.2, 7.0, 15.0)),
        ("stpierre2005", (1.8, 3.2, 7.0, 15.0)),
    ],
)
def test_the_thresholds_are_those_of_the_source(key: str, thresholds: tuple[float, ...]) -> None:
    assert band_set(key).thresholds_mg_per_g == thresholds


@pytest.mark.parametrize(
    ("key", "lic", "name"),
    [
        # Calibrations sheet, section 5, ends as printed there.
        ("pmc8528353", 0.0, "normal"),
        ("pmc8528353", 2.0, "normal"),
        ("pmc8528353", 2.0001, "mild"),
        ("pmc8528353", 7.0, "mild"),
        ("pmc8528353", 7.0001, "moderate"),
        ("pmc8528353", 15.0, "moderate"),
        ("pmc8528353", 15.0001, "severe"),
        ("guglielmo2023", 1.7999, "normal"),
        ("guglielmo2023", 1.8, "mild"),
        ("guglielmo2023", 3.2, "moderate"),
        ("guglielmo2023", 7.0, "severe"),
        ("guglielmo2023", 14.9999, "severe"),
        ("guglielmo2023", 15.0, "extreme"),
        ("olivieri1997", 0.5, UNNAMED_BAND),
        ("olivieri1997", 0.6, "normal"),
        ("olivieri1997", 1.2, "normal"),
        ("olivieri1997", 2.0, UNNAMED_BAND),
        ("olivieri1997", 3.2, "optimal target in transfused patients"),
        ("olivieri1997", 7.0, "optimal target in transfused patients"),
        ("olivieri1997", 7.0001, "raised risk of complications"),
        ("olivieri1997", 14.9999, "raised risk of complications"),
        ("olivieri1997", 15.0, "high risk of cardiac disease and early death"),
        ("stpierre2005", 1.7999, "below 1.8"),
        ("stpierre2005", 1.8, "1.8 to 3.2"),
        ("stpierre2005", 6.9999, "3.2 to 7.0"),
        ("stpierre2005", 7.0, "7.0 to 15.0"),
        ("stpierre2005", 15.0, "15.0 and above"),
    ],
)
def test_a_lic_lies_in_the_band_of_its_source(key: str, lic: float, name: str) -> None:
    band = band_set(key).band_of(lic)
    assert band is not None
    assert band.name == name


@pytest.mark.parametrize(
    ("name", "t2star_ms", "highest", "low", "high"), vectors.BANDS_OF_PMC8528353
)
def test_the_default_bands_are_those_of_the_published_table(
    name: str,
    t2star_ms: tuple[float | None, float | None],
    highest: float | None,
    low: float | None,
    high: float | None,
) -> None:
    # PMC8528353, Table 7, liver.
    band = next(b for b in band_set("pmc8528353").bands if b.name == name)
    assert (band.low_mg_per_g, band.high_mg_per_g) == (low, high)
    # The table's own R2* and T2* bounds, through the curve whose rounding they follow (sheet, 9.2).
    power = curve("garbowski2014")
    if highest is not None and high is not None:
        assert power.lic_mg_per_g(float(highest)) == pytest.approx(high, abs=0.02)
    for t2star, lic in zip(t2star_ms, (high, low), strict=True):
        if t2star is not None and lic is not None:
            assert power.lic_mg_per_g(1000.0 / t2star) == pytest.approx(lic, abs=0.06)


def test_the_same_word_means_different_ranges() -> None:
    # Calibrations sheet, section 5: 4 mg/g is mild in one set and moderate in another.
    names = {key: band_set(key).band_of(4.0) for key in ("pmc8528353", "guglielmo2023")}
    assert {key: band and band.name for key, band in names.items()} == {
        "pmc8528353": "mild",
        "guglielmo2023": "moderate",
    }


@given(key=st.sampled_from(SETS), lic=st.floats(min_value=0.0, max_value=100.0))
def test_every_lic_lies_in_exactly_one_band(key: str, lic: float) -> None:
    assert sum(band.holds(lic) for band in band_set(key).bands) == 1


@pytest.mark.parametrize(
    ("key", "limit", "qualifier", "name"),
    [
        ("pmc8528353", 12.0, ">", None),  # moderate or severe
        ("pmc8528353", 15.0, ">", "severe"),  # above 15 is severe, 15 itself is not meant
        ("guglielmo2023", 15.0, ">", "extreme"),
        ("guglielmo2023", 14.9, ">", None),
        ("pmc8528353", 0.5, "<", "normal"),
        ("pmc8528353", 2.0, "<", "normal"),
        ("pmc8528353", 2.1, "<", None),
        ("guglielmo2023", 1.8, "<", "normal"),
        ("olivieri1997", 1.0, "<", None),
    ],
)
def test_a_censored_lic_has_a_band_only_where_no_other_is_possible(
    key: str, limit: float, qualifier: Any, name: str | None
) -> None:
    band = band_set(key).band_of(limit, qualifier)
    assert (band.name if band else None) == name


@given(
    key=st.sampled_from(SETS),
    limit=st.floats(min_value=0.01, max_value=40.0),
    beyond=st.floats(min_value=1e-6, max_value=1.0),
)
def test_a_censored_band_holds_every_value_beyond_the_limit(
    key: str, limit: float, beyond: float
) -> None:
    bands = band_set(key)
    upward, downward = bands.band_of(limit, ">"), bands.band_of(limit, "<")
    assert upward is None or upward.holds(limit + 100.0 * beyond)
    assert downward is None or downward.holds(limit * (1.0 - beyond))


def test_an_unknown_set_names_all() -> None:
    with pytest.raises(UsageError, match="pmc8528353") as caught:
        band_set("guglielmo2032")
    assert "Did you mean 'guglielmo2023'" in str(caught.value)


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        ({"thresholds_mg_per_g": [2.0, 7.0]}, "want 3 names"),
        ({"thresholds_mg_per_g": [2.0, 15.0, 7.0]}, "ascend"),
        ({"thresholds_mg_per_g": [2.0, 2.0, 15.0]}, "ascend"),
        ({"names": ["normal", "mild", 3, "severe"]}, "list of texts"),
        ({"threshold_belongs_to": ["lower", "lower", "both"]}, "lower and upper"),
        ({"reference_key": "nobody1999"}, "no reference"),
        ({"colour": "red"}, "unknown key 'colour'"),
        ({"key": "stpierre2005"}, "twice"),
    ],
)
def test_a_wrong_set_is_refused_in_plain_words(changes: dict[str, Any], says: str) -> None:
    document = copy.deepcopy(_document())
    document["band_set"][0].update(changes)
    with pytest.raises(ValueError, match=says):
        read_band_sets(document)


def test_a_set_with_a_gap_or_a_shared_threshold_cannot_be_born() -> None:
    good = band_set("pmc8528353")
    first, second, *rest = good.bands
    for bands, says in (
        ((first, replace(second, low_mg_per_g=3.0), *rest), "gap or overlap"),
        ((first, replace(second, low_closed=True), *rest), "one band"),
        ((second, *rest), "open"),
        ((Band(name="all", low_mg_per_g=None, high_mg_per_g=5.0),), "open"),
    ):
        with pytest.raises(ValueError, match=says):
            replace(good, bands=bands)
