"""Tables say what `result.json` says, and a spreadsheet runs nothing in them."""

import csv
import io
import re

import pytest
from hypothesis import given
from hypothesis import strategies as st

from liverfe.export import (
    REGION_COLUMNS,
    SUMMARY_COLUMNS,
    regions_csv,
    safe_cell,
    summary_csv,
    summary_row,
)
from liverfe.study import RegionResult

HOSTILE = (
    '=HYPERLINK("http://x","y")', "+1+1", "-2+3", "@SUM(A1)", "\t=1", "\r=1", "\n=1", "  =1",
    "\uff1d1", "=",
)  # fmt: skip
"""Fault K5's list of starts, and what is known to get past it."""


def rows_of(table):
    """The table, read back by Python's csv module."""
    return list(csv.DictReader(io.StringIO(table.decode("utf-8"), newline="")))


def test_regions_csv_has_one_row_a_region_with_the_documents_numbers(made):
    document = made.document(made.result())
    rows = rows_of(regions_csv(document))
    assert [row["region"] for row in rows] == ["right lobe", "spleen"]
    assert [row["headline"] for row in rows] == ["yes", "no"]
    liver, spleen = rows
    assert float(liver["r2star_per_s"]) == 312.4
    assert float(liver["lic_mg_per_g"]) == 7.97
    assert (float(liver["lic_low_mg_per_g"]), float(liver["lic_high_mg_per_g"])) == (7.88, 8.06)
    assert float(liver["r2star_sd_biological_per_s"]) == 31.0
    assert float(liver["limit_high_r2star_per_s"]) == 1130.0
    assert int(liver["n_voxels"]) == 812
    assert liver["band"] == "moderate"
    assert spleen["r2star_per_s"] == "312.4"
    assert spleen["lic_mg_per_g"] == spleen["band"] == spleen["lic_qualifier"] == ""
    for row in rows:
        assert row["key"] == made.label.key
        assert row["caution"] == document["caution"]


def test_columns_say_their_units_in_plain_ascii():
    for column in (*REGION_COLUMNS, *SUMMARY_COLUMNS):
        assert re.fullmatch(r"[a-z0-9_]+", column)
    quantity = r"(r2star|t2star|lic|limit|band_(low|high))"
    for column in (*REGION_COLUMNS, *SUMMARY_COLUMNS):
        if re.match(quantity, column):
            assert re.search(r"(per_s|_ms|_per_g|_qualifier|_statistic|_basis)$", column), column


@pytest.mark.parametrize("text", HOSTILE)
def test_no_cell_starts_a_formula(made, text):
    region = RegionResult(summary=made.summary(f"{text} liver"), iron=made.iron())
    document = made.document(made.result(regions=(region,), headline=f"{text} liver"))
    tables = [regions_csv(document), summary_csv([summary_row(document)])]
    for table in tables:
        (row,) = rows_of(table)
        for column, cell in row.items():
            assert not re.match(r"\s*[=+@\uff1d\uff0b\uff0d\uff20]", cell), column
            if re.match(r"\s*-", cell):
                float(cell)  # a minus is only ever that of a number


@given(st.text())
def test_safe_text_starts_no_formula_and_stays_safe(text):
    cell = safe_cell(text)
    assert not re.match(r"[\s\x00-\x1f]*[=+\-@]", cell)
    assert not set("\n\r\t") & set(cell)
    assert safe_cell(cell) == cell


@given(st.lists(st.text(), min_size=1, max_size=4))
def test_any_text_comes_back_as_one_cell(texts):
    table = summary_csv([{"key": text, "reason": text} for text in texts])
    rows = rows_of(table)
    assert [row["key"] for row in rows] == [safe_cell(text) for text in texts]
    assert [row["reason"] for row in rows] == [safe_cell(text) for text in texts]


def test_negative_numbers_stay_numbers(made):
    iron = made.iron(value_mg_per_g=-0.16, low_mg_per_g=-0.2, high_mg_per_g=0.1)
    region = RegionResult(summary=made.summary(), iron=iron)
    document = made.document(made.result(regions=(region,)))
    (row,) = rows_of(regions_csv(document))
    assert row["lic_mg_per_g"] == "-0.16"
    assert rows_of(summary_csv([summary_row(document)]))[0]["lic_low_mg_per_g"] == "-0.2"


def test_refused_study_has_an_empty_table_and_a_summary_row_with_the_reason(made):
    stop = made.finding("stop", "Slice 12 lacks an echo.", "Send the whole series.")
    refused = made.result(outcome="refused", findings=(stop, made.finding("caution")))
    document = made.document(refused)
    assert rows_of(regions_csv(document)) == []
    (row,) = rows_of(summary_csv([summary_row(document)]))
    assert row["outcome"] == "refused"
    assert row["reason"] == "Slice 12 lacks an echo. Send the whole series."
    assert row["findings"] == "field-conflict"
    for column in SUMMARY_COLUMNS:
        if column.startswith(("r2star", "lic", "band")) or column in ("qualifier", "curve"):
            assert row[column] == "", column


def test_summary_row_shows_the_headline_region(made):
    row = summary_row(made.document(made.result()))
    assert list(row) == list(SUMMARY_COLUMNS)
    assert row["headline"] == "right lobe"
    assert (row["r2star_per_s"], row["lic_mg_per_g"]) == (312.4, 7.97)
    assert (row["lic_low_mg_per_g"], row["lic_high_mg_per_g"]) == (7.88, 8.06)
    assert (row["band"], row["qualifier"]) == ("moderate", "'=")
    assert row["reason"] is None  # a clean study has nothing to say
    noted = summary_row(made.document(made.result(findings=(made.finding("note"),))))
    assert noted["reason"] is None  # a note is nothing that a reader must see
    assert noted["findings"] == "field-conflict"


def test_summary_row_gives_the_caution_as_reason_and_the_qualifier_of_a_limit(made):
    iron = made.iron(qualifier=">", high_mg_per_g=None, band=None)
    region = RegionResult(summary=made.summary(), iron=iron)
    findings = (made.finding("caution", "Over the limit.", "Shorter echoes."), made.finding("note"))
    row = summary_row(made.document(made.result(regions=(region,), findings=findings)))
    assert row["qualifier"] == ">"
    assert row["lic_high_mg_per_g"] is row["band"] is None
    assert row["reason"] == "Over the limit. Shorter echoes."


def test_summary_row_without_a_region_has_no_number(made):
    row = summary_row(made.document(made.result(regions=(), headline=None)))
    assert row["outcome"] == "reported"
    assert row["r2star_per_s"] is row["lic_mg_per_g"] is row["qualifier"] is None


def test_a_local_curve_is_marked_in_both_tables(made):
    document = made.document(made.result(curve=made.curve(evidence="local", is_local=True)))
    assert summary_row(document)["curve_local"] == "LOCAL"
    assert {row["curve_local"] for row in rows_of(regions_csv(document))} == {"LOCAL"}


def test_a_row_with_an_unknown_column_is_a_mistake():
    with pytest.raises(ValueError, match="patient_name"):
        summary_csv([{"patient_name": "nobody"}])


def test_same_document_gives_the_same_bytes(made):
    tables = {regions_csv(made.document(made.result())) for _ in range(2)}
    assert len(tables) == 1
    assert not tables.pop().startswith(b"\xef\xbb\xbf")  # a mark before `key` would rename it
