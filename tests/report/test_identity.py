"""Who is named, and that with the identity ``key`` nobody is."""

from __future__ import annotations

import datetime as dt
import io
import re
from dataclasses import replace

import pikepdf
import pytest

from liverfe.echoes import Acquisition, LeftOut, Subject
from liverfe.errors import Finding
from liverfe.report.printable import person_name
from liverfe.study import StudyResult
from tests.report.pages import page_texts
from tests.report.studies import make_result, make_stack, make_summary, report_of

_SUBJECT = Subject(
    patient_name="Quillfeather^Ozymand^^Dr",
    patient_id="ZX-90417",
    birth_date=dt.date(1953, 11, 27),
    study_date=dt.date(2031, 4, 2),
    study_uid="1.2.826.0.1.9999.77",
    series_description="liver of Quillfeather",
)
_NAMING = re.compile(r"quillfeather|ozymand|90417|1953.?11.?27|27.?11.?1953|9999\.77", re.I)


def named_everywhere() -> StudyResult:
    """A study whose every free text holds the patient's name, number or birth date."""
    stack = make_stack(
        subject=_SUBJECT,
        acquisition=Acquisition(field_strength_t=1.5, scanner="One of Dr OZYMAND"),
        layout="files of ZX-90417",
        left_out=(LeftOut(what="Quillfeather, Ozymand scout", n_files=1, why="27.11.1953"),),
    )
    result = make_result(stack=stack)
    liver = replace(result.regions[0], summary=make_summary(name="quillfeather_liver 19531127"))
    finding = replace(
        Finding.of("field-from-frequency", stated="3 T", measured="2.89"),
        text="1.2.826.0.1.9999.77: folder Ozymand.",
        remedy="Ask Quillfeather.",
    )
    return replace(
        result, regions=(result.regions[1], liver), headline=liver.summary.name, findings=(finding,)
    )


def everything_in(pdf: bytes) -> str:
    """All text of a PDF, its metadata, alternative texts and titles, but not the attachment."""
    with pikepdf.open(io.BytesIO(pdf)) as document:
        parts = [repr(document.docinfo)]
        for item in document.objects:
            if isinstance(item, pikepdf.Dictionary):
                parts += [
                    str(value) for value in item.values() if isinstance(value, pikepdf.String)
                ]
            if isinstance(item, pikepdf.Stream):
                parts.append(item.read_bytes().decode("latin-1"))
    return " ".join([*parts, *page_texts(pdf)])


def test_key_identity_names_nobody_anywhere_in_the_file() -> None:
    pdf = report_of(named_everywhere(), identity="key")
    found = _NAMING.search(everything_in(pdf))
    assert found is None, "an identifier was found"
    text = page_texts(pdf)[0]
    assert "Patient key ffeeddcc99887766" in text
    assert "2031-04-02" in text
    assert "(withheld)" in text
    assert "7.97 mg Fe/g dry weight" in text


def test_full_identity_names_the_patient_on_every_page() -> None:
    pages = page_texts(report_of(named_everywhere()))
    assert all("Quillfeather, Ozymand Dr" in page for page in pages)
    assert all("ZX-90417" in page for page in pages)
    assert "1953-11-27" in pages[0]


def test_innocent_texts_stay_with_key_identity() -> None:
    text = " ".join(page_texts(report_of(make_result(), identity="key")))
    assert "Example Scanner One" not in text  # "Example" is part of this patient's name
    synthetic = make_stack(
        acquisition=Acquisition(field_strength_t=1.5, scanner="Example One", is_synthetic=True)
    )
    text = " ".join(page_texts(report_of(make_result(stack=synthetic), identity="key")))
    assert "Example One" in text
    assert "right lobe" in text


@pytest.mark.parametrize(
    ("raw", "wanted"),
    [
        # DICOM PS3.5, 6.2.1, examples of person names and their reading.
        ("Adams^John Robert Quincy^^Rev.^B.A. M.Div.",
         "Adams, John Robert Quincy Rev. B.A. M.Div."),
        ("Morrison-Jones^Susan^^^Ph.D., Chief Executive Officer",
         "Morrison-Jones, Susan Ph.D., Chief Executive Officer"),
        ("Yamada^Tarou=山田^太郎=やまだ^たろう", "Yamada, Tarou"),
        ("=山田^太郎", "山田, 太郎"),
        ("", ""),
        ("^^", ""),
    ],
)  # fmt: skip
def test_person_names_read_as_people_write_them(raw: str, wanted: str) -> None:
    assert person_name(raw) == wanted


def test_compressed_streams_are_searched_too() -> None:
    # The search above must see through compression, or it could not fail.
    assert _NAMING.search(everything_in(report_of(named_everywhere())))
