"""No name, number or birth date of the patient leaves, wherever somebody typed it."""

import gzip
import json
from dataclasses import replace

import pytest

from liverfe.echoes import Acquisition, LeftOut, Subject
from liverfe.export import (
    bids_dataset_files,
    fingerprint,
    lock_folder,
    provenance_of,
    summary_csv,
    summary_row,
    write_result,
)
from liverfe.export.privacy import region_names_withheld, withholder
from liverfe.study import RegionResult

PLANTED = (
    "quixley", "zelda", "syn-77123", "19610723", "1961-07-23", "1.2.826.0.1.3680043.10.9999.7",
)  # fmt: skip


@pytest.fixture
def leaky(made):
    """A result in which every free text holds the patient."""
    stack = made.stack(
        acquisition=Acquisition(
            field_strength_t=1.5,
            scanner="Model One, room of Quixley, Zelda",
            sequence="me3d1_SYN-77123",
            contrast_agent="for Zelda Quixley",
        ),
        layout="folder QUIXLEY^ZELDA",
        left_out=(LeftOut(what="screens of syn-77123 1961-07-23", n_files=1, why="Quixley Zelda"),),
    )
    name = "Quixley liver (zelda)"
    region = RegionResult(
        summary=made.summary(name, source="file zelda_quixley.nii.gz"), iron=made.iron()
    )
    other = RegionResult(summary=made.summary("liver SYN-77123 19610723"), iron=made.iron())
    text = f"Region '{name}' of study 1.2.826.0.1.3680043.10.9999.7 is small."
    findings = (made.finding(text=text, remedy="Ask Zelda Quixley, born 23.07.1961."),)
    return made.result(stack=stack, regions=(region, other), headline=name, findings=findings)


def test_planted_identifiers_stand_in_no_byte_that_is_written(made, leaky, tmp_path):
    source = tmp_path / "in" / "Quixley_Zelda.dcm"
    source.parent.mkdir()
    source.write_bytes(b"pixels")
    document = made.document(leaky)
    provenance = provenance_of(
        key=made.label.key, method=document["method"], software=made.software,
        inputs=[fingerprint(source, role="image")],
    )  # fmt: skip
    with lock_folder(tmp_path / "out" / made.label.key) as folder:
        write_result(folder, made.files(leaky), provenance)
    (tmp_path / "out" / "summary.csv").write_bytes(summary_csv([summary_row(document)]))
    for name, content in bids_dataset_files(made.software).items():
        (tmp_path / "out" / name).write_bytes(content)
    written = [path for path in (tmp_path / "out").rglob("*") if path.is_file()]
    assert len(written) > 20
    for path in written:
        content = path.read_bytes()
        content = gzip.decompress(content) if path.suffix == ".gz" else content
        text = f"{path.relative_to(tmp_path / 'out')} {content.decode('latin-1')}".lower()
        assert [word for word in PLANTED if word in text] == [], path.name


def test_what_was_planted_was_really_there(leaky):
    # The search above would be worth nothing if these words never reached the exporter.
    summary = leaky.regions[0].summary
    words = f"{summary.name} {summary.source} {leaky.stack.acquisition} {leaky.findings}".lower()
    assert [word for word in PLANTED if word in words] == [
        "quixley", "zelda", "syn-77123", "1.2.826.0.1.3680043.10.9999.7",
    ]  # fmt: skip


def test_headline_and_sentences_follow_a_region_whose_name_was_changed(made, leaky):
    document = made.document(leaky)
    names = [region["name"] for region in document["regions"]]
    assert document["headline"] == names[0] == "(withheld) liver ((withheld))"
    assert names[0] in document["findings"][0]["text"]


def test_regions_stay_different_when_only_the_patient_told_them_apart(made):
    names = region_names_withheld(["Zelda liver", "Quixley liver"], made.stack())
    assert list(names.values()) == ["(withheld) liver", "(withheld) liver 2"]


def test_words_of_the_trade_are_left_alone(made):
    stack = made.stack(subject=Subject(patient_name="Liver^Long^A", patient_id="12"))
    withhold = withholder(stack)
    sentence = "12 echoes are too long for a liver at 1.5 T; a repeat is better."
    assert withhold(sentence) == sentence


def test_the_nobody_of_a_synthetic_study_does_not_empty_region_names(made):
    subject = Subject(patient_name="Synthetic^Vial", patient_id="SYN-1")
    stack = made.stack(
        subject=subject, acquisition=replace(made.stack().acquisition, is_synthetic=True)
    )
    assert region_names_withheld(["vial 3"], stack) == {"vial 3": "vial 3"}


@pytest.mark.parametrize(
    ("name", "text"),
    [
        ("O'Testa^Mary Ann", "region of Mary  O'Testa"),
        ("Wang^XiaoDong=王^小東", "王小東"),
        ("Müller^Jörg", "MÜLLER, JÖRG"),
        ("Quixley^Zelda^M^Dr", "zelda_QUIXLEY"),
    ],
)
def test_names_are_found_in_any_order_case_and_script(made, name, text):
    withhold = withholder(made.stack(subject=Subject(patient_name=name)))
    assert "(withheld)" in withhold(text)
    assert "quixley" not in withhold(text).lower()


def test_a_text_that_cannot_be_written_as_utf8_does_not_stop_the_export(made):
    broken = made.stack(layout="caf\udce9 \x00 series\nnext")
    document = made.document(made.result(stack=broken))
    assert document["stack"]["layout"] == "caf    series next"
    json.dumps(document).encode()
