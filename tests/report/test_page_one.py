"""Page 1 answers: what it says, and that the same numbers stand in the data."""

from __future__ import annotations

from dataclasses import replace
from string import Formatter

import pytest

from liverfe.calibration import band_set
from liverfe.echoes import Acquisition
from liverfe.errors import Finding
from liverfe.study import StudyResult
from liverfe.wording import CAUTION, FINDING_TABLE
from tests.report.pages import page_texts
from tests.report.studies import (
    censored_result,
    make_curve,
    make_iron,
    make_result,
    make_stack,
    report_of,
)

STATUS = "DRAFT - not reviewed"


@pytest.fixture(scope="module")
def clean() -> list[str]:
    return page_texts(report_of(make_result()))


def many_regions() -> StudyResult:
    result = make_result()
    liver = result.regions[0]
    more = tuple(
        replace(liver, summary=replace(liver.summary, name=f"segment_{i}_of_a_fine_division"))
        for i in range(70)
    )
    return replace(result, regions=(*result.regions, *more))


def field_caution() -> Finding:
    return Finding.of("field-conflict", stated="1.5", measured="2.894")


@pytest.mark.parametrize("make", [make_result, censored_result, many_regions])
def test_caution_status_key_and_page_number_stand_on_every_page(make: object) -> None:
    pages = page_texts(report_of(make()))  # type: ignore[operator]
    assert len(pages) >= 2
    for number, text in enumerate(pages, start=1):
        assert CAUTION in text, number
        assert STATUS in text, number
        assert f"study 00112233aabbccdd page {number} of {len(pages)}" in text, number


def test_answer_comes_in_the_order_that_a_reader_needs(clean: list[str]) -> None:
    wanted = [
        "Synthetic, Liver Example", "SYN-0001", "2031-04-02", "Example Scanner One", "1.5 T",
        "7.97 mg Fe/g dry weight", "95 % interval 7.88 to 8.06 mg/g", "142.7 µmol/g dry weight",
        "moderate 7 to 15 mg/g band set pmc8528353", "No caution", "The interval covers",
        "A change must exceed", "R L", "Signal against echo time",
    ]  # fmt: skip
    places = [clean[0].index(text) for text in wanted]
    assert places == sorted(places)


def test_numbers_are_the_full_values_rounded_once() -> None:
    # 7.9718: round-half-even of the value, by hand; 7.9718 / 55.845 * 1000 = 142.748 µmol/g.
    text = page_texts(report_of(make_result()))[0]
    iron = make_iron()
    assert f"{iron.value_mg_per_g:.2f} mg Fe/g" in text
    assert f"{iron.low_mg_per_g:.2f} to {iron.high_mg_per_g:.2f} mg/g" in text
    assert f"{iron.value_umol_per_g:.1f} µmol/g" in text
    assert "R2* 312.4 s⁻¹ (309.0 to 315.9)" in text
    assert "T2* 3.20 ms" in text  # 1000 / 312.4 = 3.201


def test_published_test_retest_figure_stands_beside_the_interval(clean: list[str]) -> None:
    # 2.77 x 4.6 % = 12.7 % and 2.77 x 5.8 % = 16.1 % (Kirk 2010, abstract); of 7.97: 1.0 and 1.3.
    assert "13 % (1.0 mg/g here) on the same scanner, 16 % (1.3 mg/g) between" in clean[0]
    assert "Kirk 2010" in clean[0]
    assert "It does not cover the calibration" in clean[0]


def test_other_curves_span_is_named(clean: list[str]) -> None:
    assert "Other curves of this field give 8.14 to 9.80 mg/g" in clean[0]


def test_whole_band_set_is_laid_out_with_its_thresholds(clean: list[str]) -> None:
    assert "normal 2 mild 7 moderate 15 severe" in clean[0]


def test_value_over_the_limit_is_shown_as_a_limit() -> None:
    text = page_texts(report_of(censored_result()))[0]
    assert "> 29.3 mg Fe/g dry weight" in text
    assert "95 % interval from 29.3 mg/g, open upwards" in text
    assert "Above the highest LIC that this scan can measure" in text
    assert "R2* > 1130.0 s⁻¹" in text
    assert "T2* < 0.88 ms" in text  # 1000 / 1130 = 0.885, on the other side
    assert "a limit cannot be compared" in text
    assert "mg/g here" not in text
    assert "decay at the limit of this scan" in text
    assert "fit with noise floor" not in text


def test_value_under_the_limit_is_shown_as_a_limit() -> None:
    result = make_result()
    iron = make_iron(0.412, low_mg_per_g=None, high_mg_per_g=0.412, qualifier="<")
    below = replace(result, regions=(replace(result.regions[0], iron=iron),))
    text = page_texts(report_of(below))[0]
    assert "< 0.41 mg Fe/g dry weight" in text
    assert "interval up to 0.41 mg/g, open downwards" in text
    assert "Below the lowest LIC" in text


def test_limit_that_leaves_several_bands_names_none() -> None:
    result = make_result()
    bands = band_set("pmc8528353")
    iron = make_iron(5.0, high_mg_per_g=None, qualifier=">", band=bands.band_of(5.0, ">"))
    text = page_texts(report_of(replace(result, regions=(replace(result.regions[0], iron=iron),))))[
        0
    ]
    assert "not one band" in text
    assert "more than one band of the set possible" in text


def test_cautions_stand_on_page_one_with_their_remedy() -> None:
    finding = field_caution()
    text = page_texts(report_of(make_result(findings=(finding,))))[0]
    assert "1 caution" in text
    assert "No caution" not in text
    assert finding.text in text
    assert finding.remedy in text


def test_caution_of_a_region_reaches_page_one_even_if_not_passed_on() -> None:
    result = make_result()
    liver = result.regions[0]
    marked = replace(liver, summary=replace(liver.summary, findings=(field_caution(),)))
    text = page_texts(report_of(replace(result, regions=(marked,))))[0]
    assert "1 caution" in text


def test_notes_are_no_cautions() -> None:
    note = Finding.of("field-from-frequency", stated="3 T", measured="2.894")
    pages = page_texts(report_of(make_result(findings=(note,))))
    assert "No caution" in pages[0]
    assert note.text in pages[1]


def test_many_cautions_are_counted_and_leave_page_one_its_pictures() -> None:
    findings = tuple(
        Finding.of("field-conflict", stated=f"{i}", measured="2.894") for i in range(7)
    )
    pages = page_texts(report_of(make_result(findings=findings)))
    assert "7 cautions" in pages[0]
    assert "3 more among the findings" in pages[0]
    assert "Signal against echo time" in pages[0]
    assert all(finding.text in " ".join(pages[1:]) for finding in findings)


def test_pictures_move_to_page_two_rather_than_shrink_out_of_sight() -> None:
    findings = tuple(
        Finding(code="field-conflict", level="caution", text=f"{i} " + "word " * 120, remedy="Do.")
        for i in range(4)
    )
    pages = page_texts(report_of(make_result(findings=findings)))
    assert "7.97 mg Fe/g" in pages[0]
    assert "Signal against echo time" not in pages[0]
    assert "Signal against echo time" in pages[1]


def test_reason_for_no_lic_stands_in_one_line_with_r2star() -> None:
    result = make_result()
    bare = tuple(replace(region, iron=None, other_curves=()) for region in result.regions)
    at_7t = make_stack(acquisition=Acquisition(field_strength_t=7.0))
    text = page_texts(report_of(replace(result, stack=at_7t, curve=None, regions=bare)))[0]
    assert "LIC not stated There is no calibration curve for 7 T" in text
    assert "R2* 312.4 s⁻¹ (309.0 to 315.9)" in text
    assert "mg Fe/g" not in text

    unknown = make_stack(acquisition=Acquisition())
    text = page_texts(report_of(replace(result, stack=unknown, curve=None, regions=bare)))[0]
    assert "LIC not stated The field strength is not known" in text

    spleen = result.regions[1]
    text = page_texts(report_of(replace(result, regions=(spleen,), headline=None)))[0]
    assert "LIC not stated No region is liver" in text
    assert "R2* 80.0 s⁻¹" in text

    text = page_texts(report_of(replace(result, regions=bare)))[0]
    assert "LIC not stated A finding or the method forbids" in text


def test_study_without_a_region_shows_maps_and_says_so() -> None:
    text = page_texts(report_of(make_result(regions=(), headline=None)))[0]
    assert "LIC not stated No region was drawn" in text
    assert "R2* of the same slice" in text
    assert "outline of the region" not in text


def test_banners_mark_synthetic_studies_and_local_curves(clean: list[str]) -> None:
    assert "SYNTHETIC" not in clean[0]
    assert "LOCAL" not in clean[0]
    synthetic = make_stack(acquisition=Acquisition(field_strength_t=1.5, is_synthetic=True))
    local = replace(make_curve(), is_local=True, evidence="local")
    text = page_texts(report_of(make_result(stack=synthetic, curve=local)))[0]
    assert "SYNTHETIC STUDY - no patient" in text
    assert "LOCAL CURVE" in text


def test_a_doubt_that_regions_share_is_one_caution_on_page_one() -> None:
    doubt = Finding.of("echoes-disagree", **facts_of_motion("liver"))
    result = make_result()
    liver = result.regions[0]
    also = Finding.of("echoes-disagree", **facts_of_motion("spleen"))
    regions = tuple(
        replace(liver, summary=replace(liver.summary, name=name, findings=(found,)))
        for name, found in ((liver.summary.name, doubt), ("spleen", also))
    )
    told = replace(doubt, text=f"{doubt.text} It shows in other regions too: spleen.")
    page = page_texts(report_of(replace(result, findings=(told,), regions=regions)))[0]
    assert "1 caution" in page
    assert page.count("as by motion") == 1


def facts_of_motion(region: str) -> dict[str, str]:
    wording = FINDING_TABLE["echoes-disagree"]
    facts = {name for _, name, _, _ in Formatter().parse(wording.text + wording.effect) if name}
    return {name: region if name == "region" else "3" for name in facts}
