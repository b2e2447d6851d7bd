"""Whatever a file calls a patient or a region is shown as text, and nothing else happens."""

from __future__ import annotations

import time
from dataclasses import replace

import pytest

from liverfe.echoes import Subject
from liverfe.report.printable import printable
from liverfe.study import StudyResult
from tests.report.pages import page_texts
from tests.report.studies import make_result, make_stack, make_summary, report_of


def called(name: str, *, patient_id: str = "SYN-0001") -> StudyResult:
    subject = Subject(patient_name=name, patient_id=patient_id)
    return make_result(stack=make_stack(subject=subject))


def first_page(result: StudyResult) -> str:
    return page_texts(report_of(result))[0]


@pytest.mark.parametrize(
    "name",
    [
        '#panic("gone")',
        "$ integral_0^1 $",
        "*bold* _italic_ `raw` <label> @reference",
        "= heading",
        "- item + item / term: x",
        r"\u{41} \ // comment",
        '#read("/etc/hostname")',
        '"quoted" {braces} [brackets] {name}',
        "%s {0} {page} of {pages}",
    ],
)
def test_markup_is_shown_not_obeyed(name: str) -> None:
    assert name in first_page(called("Somebody", patient_id=name))


def test_markup_in_a_region_name_reaches_pages_captions_and_alternative_text() -> None:
    result = make_result()
    name = '#panic() $x$ \\"{slice}" <b>'
    liver = replace(result.regions[0], summary=make_summary(name=name))
    pages = page_texts(report_of(replace(result, regions=(liver,), headline=name)))
    assert f"region: {name}" in pages[0]
    assert f"region {name}" in pages[0]
    assert name in pages[1]


def test_writing_that_has_no_font_is_replaced_and_said() -> None:
    text = first_page(called("日本 Taro"))
    assert "?? Taro" in text
    assert "Some characters of names or texts cannot be printed" in text


def test_private_and_unassigned_codes_and_emoji_are_replaced() -> None:
    text = first_page(called("a\ue000b\U000e0fffc😀d"))
    assert "a?b?c?d" in text
    assert "cannot be printed" in text


def test_a_question_mark_of_its_own_needs_no_remark() -> None:
    text = first_page(called("Who?"))
    assert "Who?" in text
    assert "cannot be printed" not in text


def test_other_alphabets_that_have_a_font_are_kept() -> None:
    text = first_page(called("Ångström-Łódź Ćwiok Жанна Ωμέγα"))
    assert "Ångström-Łódź Ćwiok Жанна Ωμέγα" in text
    assert "cannot be printed" not in text


def test_right_to_left_writing_is_kept() -> None:
    text = first_page(called("שלום"))
    assert "שלום" in text or "םולש" in text  # a reader may give either order
    assert "cannot be printed" not in text


def test_marks_that_reorder_a_line_cannot_turn_a_name_or_number_around() -> None:
    text = first_page(called("abc\u202edef\u2066ghi"))
    assert "abc?def?ghi" in text


def test_control_characters_and_lone_surrogates_are_replaced() -> None:
    text = first_page(called("a\x00b\x1b[31mc\ud800d"))
    assert "a?b?[31mc?d" in text


def test_padding_and_line_breaks_vanish() -> None:
    assert printable("DOE\x00\x00") == "DOE"
    assert printable(" a\r\n\tb\u2028c ") == "a b c"


def test_a_name_without_end_is_cut_and_page_one_stays_one_page() -> None:
    pages = page_texts(report_of(called("W" * 5000, patient_id="9 " * 5000)))
    assert len(pages) == 2
    assert "W…" in pages[0].replace(" ", "")
    assert "Signal against echo time" in pages[0]


def test_a_region_name_without_end_is_cut() -> None:
    result = make_result()
    liver = replace(result.regions[0], summary=make_summary(name="lobe" * 500))
    pages = page_texts(report_of(replace(result, regions=(liver,), headline="lobe" * 500)))
    assert len(pages) == 2
    assert "…" in pages[0]
    assert "7.97 mg Fe/g" in pages[0]


def test_many_kinds_of_writing_do_not_take_long() -> None:
    every_block = "".join(chr(0x4E00 + i) for i in range(90))
    start = time.perf_counter()
    report_of(called(every_block))
    assert time.perf_counter() - start < 15.0  # seconds; a loaded machine takes about two


def test_document_metadata_holds_no_name() -> None:
    pdf = report_of(called("Quillfeather^Ozymand"))
    head = pdf[:2000] + pdf[-3000:]
    assert b"Quillfeather" not in head
