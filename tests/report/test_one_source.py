"""The page and the data file never tell two truths, and every word stands in one place."""

from __future__ import annotations

import io
import json
import re
from pathlib import Path

import pikepdf
import pytest

from liverfe.export import result_document, to_json_bytes
from liverfe.study import StudyResult
from liverfe.wording import REPORT, shown
from tests.report.pages import page_texts
from tests.report.studies import LABEL, SOFTWARE, censored_result, make_result, report_of


@pytest.mark.parametrize("make", [make_result, censored_result])
def test_every_number_of_a_region_in_the_attached_file_stands_on_paper(make: object) -> None:
    result: StudyResult = make()  # type: ignore[operator]
    document = to_json_bytes(result_document(result, label=LABEL, software=SOFTWARE))
    pdf = report_of(result, document=document)
    with pikepdf.open(io.BytesIO(pdf)) as opened:
        data = json.loads(opened.attachments["result.json"].get_file().read_bytes())
    first, second = page_texts(pdf)[:2]

    for region in data["regions"]:
        r2star, lic = region["r2star_per_s"], region["lic_mg_per_g"]
        for key in ("value", "low", "high", "iqr"):
            if r2star[key] is not None:
                assert shown(r2star[key], "r2star_per_s") in second, key
        if lic is not None and lic["value"] is not None:
            sign = "" if lic["qualifier"] == "=" else lic["qualifier"] + " "
            assert f"{sign}{shown(lic['value'], 'lic_mg_per_g')} mg Fe/g dry weight" in first
            assert f"{sign}{shown(region['lic_umol_per_g'], 'lic_umol_per_g')} µmol/g" in first
            for key in ("low", "high"):
                if lic[key] is not None:
                    assert shown(lic[key], "lic_mg_per_g") in first, key
            band = region["band"]
            assert band["name"] in first
            assert band["set"] in first
    assert data["study"]["key"] in first
    assert data["study"]["date"] in first
    assert data["caution"] in first
    assert data["method"]["id"] in second


def test_every_word_of_the_report_is_used_and_none_is_missing(repository: Path) -> None:
    room = repository / "liverfe" / "report"
    sources = "".join(
        path.read_text(encoding="utf-8")
        for path in room.iterdir()
        if path.suffix in (".py", ".typ")
    )
    chosen = ("evidence_", "noise_", "trim_", "level_", "why_", "plane_", "side_", "caption_map_")
    for key in REPORT:
        assert re.search(rf'"{key}"|\bw\.{key}\b', sources) or key.startswith(chosen), key
    for key in re.findall(r'REPORT\["(\w+)"\]', sources) + re.findall(r"\bw\.(\w+)", sources):
        assert key in REPORT, key


def test_template_holds_no_sentence_of_its_own(repository: Path) -> None:
    template = (repository / "liverfe" / "report" / "report.typ").read_text(encoding="utf-8")
    code = re.sub(r"//.*", "", template)
    for text in re.findall(r'"([^"]*)"', code):
        assert " " not in text.strip() or text in ("Libertinus Serif", "DejaVu Sans Mono"), text
