"""Page 2 and on: everything that stands behind the answer. And the one page of a refusal."""

from __future__ import annotations

import hashlib
from dataclasses import replace

import pytest

from liverfe.errors import Finding
from liverfe.report.repeatability import PUBLISHED_REPEATABILITY
from liverfe.study import Method, StudyResult
from liverfe.wording import CAUTION, FINDING_TABLE
from tests.report.pages import page_texts
from tests.report.studies import DOCUMENT, make_result, report_of


@pytest.fixture(scope="module")
def behind() -> str:
    return page_texts(report_of(make_result()))[1]


def test_every_region_stands_in_the_table(behind: str) -> None:
    row = "right lobe liver 799 of 812 312.4 (309.0 to 315.9) 41.0 7.97 (7.88 to 8.06) 0 2 11 313.0"
    assert row in behind
    assert "spleen spleen 799 of 812 80.0 (76.6 to 83.5) 41.0 – 0 2 11 80.6" in behind


def test_method_is_told_in_three_lines(behind: str) -> None:
    assert "Fit: rician-ml, voxel by voxel." in behind
    assert "Noise: σ = 4.00 a channel (± 0.4 %), 1 channel (Rician), from background air." in behind
    assert "scaled median absolute deviations" in behind
    assert "passes 10 % of R2*" in behind


def test_method_follows_the_method_not_the_house() -> None:
    method = Method(
        estimator="log-linear", trim="none", interval=0.9, voxel_relative_se=0.2,
        noise="given", sigma=3.0,
    )  # fmt: skip
    result = make_result(method=method)
    assert result.noise is not None
    result = replace(result, noise=replace(result.noise, method="given", n_channels=6))
    pages = page_texts(report_of(result))
    assert "90 % interval 7.88 to 8.06" in pages[0]
    for wanted in (
        "Fit: log-linear", "no voxel trimmed", "90 % interval", "reaches 20 % of R2*",
        "6 effective channels, from the method file",
    ):  # fmt: skip
        assert wanted in pages[1], wanted


def test_limits_are_told_with_their_reason(behind: str) -> None:
    assert "R2* from 0.0 to 1130.0 s⁻¹, LIC from 0.00 to 29.3 mg/g" in behind
    assert "one voxel (signal 410.0, noise 4.00) reaches 10 % of R2*" in behind


def test_the_spread_of_iron_is_told_apart_from_noise(behind: str) -> None:
    assert "R2* of its voxels spreads by 31.0 s⁻¹ (SD) beyond what noise explains." in behind


def test_every_other_curve_stands_with_citation_and_evidence(behind: str) -> None:
    assert "hernando2023_1p5 7.97 (7.88 to 8.06) moderate Hernando" in behind
    assert "wood2005 8.14 (8.05 to 8.23) moderate Wood" in behind
    assert "garbowski2014 9.80" in behind
    assert "hankins2009 8.29" in behind


def test_calibration_tells_equation_evidence_cohort_range_and_fit_model(behind: str) -> None:
    for wanted in (
        "hernando2023_1p5 (1.5 T)", "LIC = −0.16 + 2.603×10⁻² · R2*", "radiol.213256",
        "abstract: equation read in the paper's own abstract", "207 participants",
        "not established", "Fit model of origin", "rician-ml. A fit model is part of a calibration",
    ):  # fmt: skip
        assert wanted in behind, wanted


def test_audit_block_holds_keys_method_versions_inputs_and_hash(behind: str) -> None:
    for wanted in (
        "00112233aabbccdd", "ffeeddcc99887766", Method().id, "liverfe 0.1.0, python 3.11.9",
        hashlib.sha256(DOCUMENT).hexdigest(), "Input files 60",
        "phase images of series 3 (60): not magnitude",
    ):  # fmt: skip
        assert wanted in behind, wanted


def test_what_was_not_measured_is_said(behind: str) -> None:
    assert "Not measured Fat, inflammation and fibrosis" in behind


def test_findings_stand_with_effect_remedy_and_code() -> None:
    finding = Finding.of("field-conflict", stated="1.5", measured="2.894")
    text = page_texts(report_of(make_result(findings=(finding,))))[1]
    for wanted in (finding.text, finding.remedy, FINDING_TABLE[finding.code].effect, finding.code):
        assert wanted in text, wanted


def test_clean_study_has_no_finding(behind: str) -> None:
    assert "Findings None: every check passed." in behind


def test_refusal_is_one_page_that_says_what_why_and_what_to_do() -> None:
    stops = [code for code, entry in FINDING_TABLE.items() if entry.level == "stop"]
    findings = tuple(
        Finding(code=code, level="stop", text=f"Found in file {code}.dcm.", remedy=f"Do {code}.")
        for code in stops[:3]
    )
    assert findings, "the table has stop findings"
    result = StudyResult(outcome="refused", findings=findings, method=Method())
    pages = page_texts(report_of(result))
    assert len(pages) == 1
    assert "Refused" in pages[0]
    assert "neither LIC nor R2* is stated" in pages[0]
    assert "mg Fe/g" not in pages[0]
    assert CAUTION in pages[0]
    assert "DRAFT - not reviewed" in pages[0]
    for finding in findings:
        assert finding.text in pages[0]
        assert finding.remedy in pages[0]
        assert " ".join(FINDING_TABLE[finding.code].effect.split()) in pages[0]


def test_a_refused_study_shows_no_number_that_its_result_still_holds() -> None:
    stop = next(code for code, entry in FINDING_TABLE.items() if entry.level == "stop")
    finding = Finding(code=stop, level="stop", text="Found.", remedy="Repeat.")
    result = replace(make_result(findings=(finding,)), outcome="refused")
    pages = page_texts(report_of(result))
    assert len(pages) == 1
    assert "7.97" not in pages[0]
    assert "312.4" not in pages[0]
    assert "Synthetic, Liver Example" in pages[0]


def test_test_retest_figures_are_those_of_the_abstract() -> None:
    # Kirk 2010, abstract: interstudy 4.6 %, intercentre 5.8 %; 2.77 = 1.96 * sqrt(2).
    assert PUBLISHED_REPEATABILITY.same_scanner_share == pytest.approx(
        1.96 * 2**0.5 * 0.046, rel=2e-3
    )
    assert PUBLISHED_REPEATABILITY.between_scanners_share == pytest.approx(
        1.96 * 2**0.5 * 0.058, rel=2e-3
    )
