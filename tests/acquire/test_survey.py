"""What a survey looks at, what it says, and what it never says."""

from __future__ import annotations

import pickle
import time
from pathlib import Path

import numpy as np
import pydicom
import pytest
from pydicom.dataset import Dataset

from liverfe.acquire import find_stacks, load_stack
from tests.acquire import dicom_study as made


def test_a_survey_of_three_hundred_files_takes_below_a_second_of_processor_time(
    tmp_path: Path,
) -> None:
    stored = np.zeros((4, 72, 24, 32), dtype=np.uint16)
    made.write_study(tmp_path, stored)
    seconds = []
    for _ in range(3):
        start = time.process_time()
        survey = find_stacks([tmp_path])
        seconds.append(time.process_time() - start)
    assert survey.stacks[0].n_files == 288
    assert min(seconds) < 0.8


def test_loading_a_full_study_takes_below_a_second_of_processor_time(tmp_path: Path) -> None:
    stored = np.repeat(made.stored_object(), 5, axis=1)[:, :24]
    stored = np.tile(stored, (1, 1, 8, 8))
    (plan,) = find_stacks([made.write_study(tmp_path, stored)]).stacks
    start = time.process_time()
    loaded = load_stack(plan)
    assert time.process_time() - start < 1.0
    assert loaded.stack.magnitude.shape == (256, 192, 24, 4)


def test_progress_is_told_for_every_file(tmp_path: Path) -> None:
    told: list[tuple[int, int]] = []
    find_stacks([made.write_study(tmp_path)], progress=lambda n, of: told.append((n, of)))
    assert told == [(n, 20) for n in range(1, 21)]


def test_files_are_known_by_content_and_the_rest_is_listed(tmp_path: Path) -> None:
    made.write_study(tmp_path, prefix="im.txt.")
    (tmp_path / "notes.dcm").write_text("no image")
    (tmp_path / "empty.dcm").write_bytes(b"")
    (tmp_path / ".hidden").write_text("x")
    survey = find_stacks([tmp_path])
    assert survey.verdict == "usable"
    assert {left.what: left.n_files for left in survey.left_out} == {
        "other files": 1,
        "empty file": 1,
    }


def test_links_inside_a_folder_are_not_followed(tmp_path: Path) -> None:
    outside = made.write_study(tmp_path / "outside")
    study = tmp_path / "study"
    study.mkdir()
    (study / "folder").symlink_to(outside, target_is_directory=True)
    (study / "file").symlink_to(sorted(outside.iterdir())[0])
    survey = find_stacks([study])
    assert survey.stacks == ()
    assert [(left.what, left.n_files) for left in survey.left_out] == [("symbolic link", 2)]
    # What the user names is the user's business.
    assert find_stacks([study / "folder"]).verdict == "usable"


def test_results_of_our_own_are_no_input(tmp_path: Path) -> None:
    made.write_study(tmp_path / "images")
    result = made.write_study(tmp_path / "results" / "0123456789abcdef" / "dicom")
    for name in ("manifest.json", "result.json"):
        (result.parent / name).write_text("{}")
    survey = find_stacks([tmp_path])
    assert survey.verdict == "usable"
    assert survey.stacks[0].findings == (), "not even duplicates"
    assert [left.what for left in survey.left_out] == ["result folder of liverfe"]


def test_other_dicom_objects_are_listed_by_their_names(tmp_path: Path) -> None:
    def as_ct(dataset: Dataset, echo: int, k: int) -> bool:
        dataset.SOPClassUID = "1.2.840.10008.5.1.4.1.1.2"
        return echo == 0

    made.write_study(tmp_path)
    made.write_study(tmp_path, change=as_ct, prefix="ct")
    survey = find_stacks([tmp_path])
    assert [(left.what, left.n_files) for left in survey.left_out] == [
        ("CT Image Storage objects", 5)
    ]


def test_no_message_says_whose_images_they_are(tmp_path: Path) -> None:
    """The patient is planted in folder and file names, as exports do."""
    folder = made.write_study(
        tmp_path / "QUIXLEY_ZELDA" / "study", prefix="Quixley_Zelda_77123_", change=_spin_echo
    )
    path = sorted(folder.iterdir())[0]
    path.write_bytes(path.read_bytes()[:-700])
    survey = find_stacks([tmp_path])
    said = " ".join(
        [
            *(f"{f.text} {f.remedy}" for plan in survey.stacks for f in plan.findings),
            *(f"{f.text} {f.remedy}" for f in survey.findings),
            *(f"{left.what} {left.why}" for left in survey.left_out),
            *(plan.layout for plan in survey.stacks),
        ]
    )
    assert "file ..._..._..._0" in said, "the file can still be found"
    for word in ("quixley", "zelda", "77123", str(tmp_path).lower()):
        assert word not in said.lower()


def _spin_echo(dataset: Dataset, echo: int, k: int) -> None:
    dataset.ScanningSequence = "SE"


def test_subject_and_acquisition_are_those_of_the_header(tmp_path: Path) -> None:
    (plan,) = find_stacks([made.write_study(tmp_path)]).stacks
    source = pydicom.dcmread(plan.sources[0].path)
    assert plan.subject.patient_name == str(source.PatientName)
    assert plan.subject.patient_id == source.PatientID
    assert plan.subject.study_uid == source.StudyInstanceUID
    assert str(plan.subject.study_date) == "2031-04-02"
    how = plan.acquisition
    assert (how.scanner, how.sequence) == ("Invented Works Model One", "me3d1")
    assert (how.repetition_time_ms, how.flip_angle_deg) == (12.5, 5.0)
    assert (how.field_strength_t, how.imaging_frequency_mhz) == (1.5, 63.87)
    assert how.acquired_matrix == (made.COLUMNS, made.ROWS)
    assert not how.is_synthetic


@pytest.mark.parametrize(
    ("character_set", "encoded", "shown", "is_noted"),
    [
        ("ISO_IR 100", "Müller^Åse".encode("latin-1"), "Müller^Åse", False),
        ("ISO_IR 192", "Müller^Åse".encode(), "Müller^Åse", False),
        ("Not Suppli", b"Quixley^Zelda", "Quixley^Zelda", True),
    ],
)
def test_names_are_decoded_by_their_character_set(
    tmp_path: Path, character_set: str, encoded: bytes, shown: str, is_noted: bool
) -> None:
    """B29: an unknown set is flagged, never raised or printed."""
    folder = made.write_study(tmp_path, change=_named(len(encoded)))
    # Written past pydicom's own checks, byte by byte.
    for path in folder.iterdir():
        data = path.read_bytes().replace(b"#" * len(encoded), encoded)
        path.write_bytes(data.replace(b"ISO_IR 144", character_set.encode()))
    (plan,) = find_stacks([folder]).stacks
    assert plan.subject.patient_name == shown
    codes = [finding.code for finding in plan.findings]
    assert codes == (["name-not-decodable"] if is_noted else [])


def _named(length: int) -> made.Change:
    def change(dataset: Dataset, echo: int, k: int) -> None:
        dataset.SpecificCharacterSet = "ISO_IR 144"
        dataset.PatientName = "#" * length

    return change


def test_plans_and_stacks_travel_to_a_worker_process(tmp_path: Path) -> None:
    (plan,) = find_stacks([made.write_study(tmp_path)]).stacks
    copy = pickle.loads(pickle.dumps(plan))
    np.testing.assert_array_equal(
        load_stack(copy).stack.magnitude, made.expected_magnitude(made.stored_object())
    )


def test_every_file_is_hashed_as_it_was_read(tmp_path: Path) -> None:
    import hashlib

    loaded = load_stack(find_stacks([made.write_study(tmp_path)]).stacks[0])
    assert len(loaded.inputs) == 20
    for file in loaded.inputs:
        data = file.path.read_bytes()
        assert file.sha256 == hashlib.sha256(data).hexdigest()
        assert file.n_bytes == len(data)
