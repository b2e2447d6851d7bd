"""The file itself: standards, tags, attachment, fonts, the same bytes again."""

from __future__ import annotations

import datetime as dt
import io
import os
import shutil
import subprocess
from pathlib import Path

import pikepdf
import pytest

from liverfe.report import write_report
from liverfe.study import Method, StudyResult
from tests.report.pages import page_texts, tags
from tests.report.studies import DOCUMENT, LABEL, make_result, make_stack, report_of


@pytest.fixture(scope="module")
def pdf() -> bytes:
    return report_of(make_result())


def test_declares_pdf_a_3a_and_pdf_ua_1(pdf: bytes) -> None:
    # The keys of ISO 19005-3 (6.6.4) and ISO 14289-1 (5): what an archive looks at.
    with pikepdf.open(io.BytesIO(pdf)) as document, document.open_metadata() as metadata:
        assert (metadata["pdfaid:part"], metadata["pdfaid:conformance"]) == ("3", "A")
        assert metadata["pdfuaid:part"] == "1"
        assert bool(document.Root.MarkInfo.Marked)
        assert str(document.Root.Lang).startswith("en")


def test_result_json_is_attached_byte_for_byte(pdf: bytes) -> None:
    with pikepdf.open(io.BytesIO(pdf)) as document:
        assert list(document.attachments) == ["result.json"]
        attached = document.attachments["result.json"]
        assert attached.get_file().read_bytes() == DOCUMENT
        assert attached.get_file().mime_type == "application/json"


def test_awkward_json_is_attached_byte_for_byte() -> None:
    awkward = '{"name": "é 日本 \\u0000 #panic() $x$", "tail": "\u2028"}\r\n\n'.encode()
    with pikepdf.open(io.BytesIO(report_of(make_result(), document=awkward))) as document:
        assert document.attachments["result.json"].get_file().read_bytes() == awkward


def test_a_document_that_is_not_utf8_is_refused() -> None:
    with pytest.raises(ValueError, match="utf-8"):
        report_of(make_result(), document=b"\xff\xfe")


def test_same_input_gives_the_same_bytes(pdf: bytes) -> None:
    assert report_of(make_result()) == pdf


def test_document_date_is_the_study_date_and_the_callers_where_given(pdf: bytes) -> None:
    def created(of: bytes) -> str:
        with pikepdf.open(io.BytesIO(of)) as document:
            return str(document.docinfo["/CreationDate"])

    assert created(pdf).startswith("D:20310402")
    other = report_of(make_result(), created=dt.date(2032, 2, 29))
    assert created(other).startswith("D:20320229")


def test_every_font_is_embedded(pdf: bytes) -> None:
    with pikepdf.open(io.BytesIO(pdf)) as document:
        fonts = [o for o in document.objects if isinstance(o, pikepdf.Dictionary)]
        described = [f for f in fonts if f.get("/Type") == "/FontDescriptor"]
        assert described
        for font in described:
            assert {"/FontFile2", "/FontFile3"} & set(font.keys()), str(font.FontName)


def test_three_figures_carry_alternative_text_of_what_they_show(pdf: bytes) -> None:
    texts = [alt for kind, alt in tags(pdf) if kind == "/Figure"]
    assert len(texts) == 3
    grey, colour, decay = texts
    assert "slice 4 of 5 (axial)" in grey
    assert "left is the patient's right" in grey
    assert "right lobe" in grey
    assert "20 (dark blue) to 1000 per second" in colour
    assert "hatched" in colour
    assert "12 echo times from 0.9 to 10.8 ms" in decay
    assert "noise floor" in decay


def test_headings_captions_and_table_headers_are_tagged(pdf: bytes) -> None:
    kinds = [kind for kind, _ in tags(pdf)]
    assert kinds.count("/H1") == 1
    assert kinds.count("/H2") >= 8
    assert kinds.count("/Caption") == 3
    assert kinds.count("/TH") == 10 + 5  # regions, curves; no findings in a clean study


def test_study_without_images_or_date_still_makes_a_valid_file() -> None:
    result = StudyResult(outcome="reported", findings=(), method=Method())
    pdf = write_report(result, label=LABEL, document=DOCUMENT, software={})
    assert "LIC not stated" in page_texts(pdf)[0]


def test_files_without_a_study_date_give_the_same_bytes_too() -> None:
    from liverfe.echoes import Subject

    first, second = (report_of(make_result(stack=make_stack(subject=Subject()))) for _ in "ab")
    assert first == second


@pytest.mark.parametrize(
    ("program", "arguments", "wanted"),
    [
        ("qpdf", ["--check"], "No syntax or stream encoding errors"),
        ("pdfinfo", [], "Tagged:          yes"),
    ],
)
def test_outside_programs_find_no_fault(
    pdf: bytes, tmp_path: Path, program: str, arguments: list[str], wanted: str
) -> None:
    found = shutil.which(program)
    if found is None:
        if os.environ.get("CI") == "true":
            pytest.fail(f"{program} must be installed on the machine of CI")
        pytest.skip(f"{program} is not installed")
    path = tmp_path / "report.pdf"
    path.write_bytes(pdf)
    run = subprocess.run(
        [found, *arguments, str(path)], capture_output=True, text=True, check=True, timeout=60
    )
    assert wanted in run.stdout
