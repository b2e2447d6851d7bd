"""The same study gives the same bytes, whatever its files are called; nobody's name gets out."""

from __future__ import annotations

import hashlib
import random
import shutil
from pathlib import Path

import pydicom
import pytest

from liverfe.cli import main
from liverfe.errors import UsageError
from liverfe.export import verify_folder
from liverfe.journey import run_study
from liverfe.phantom import MadeStudy
from tests.journey.scans import all_text, edit, make_coarse, set_tag

PLANTED = ("Quixleyplant", "Zeldaplant", "PLANTID77123", "PLANTACCESSION", "Plantdoctor")


def hashes(folder: Path) -> dict[str, str]:
    return {
        path.relative_to(folder).as_posix(): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in folder.rglob("*")
        if path.is_file()
    }


def test_shuffled_files_give_the_same_bytes(clean_study: MadeStudy, tmp_path: Path) -> None:
    # Faults sheet, D5 and G10: all files of the result, the PDF among them.
    first = run_study([clean_study.images], regions=clean_study.labels, out=tmp_path / "one")
    shuffled = tmp_path / "shuffled"
    shuffled.mkdir()
    files = sorted(path for path in clean_study.images.rglob("*") if path.is_file())
    numbers = random.Random(4).sample(range(1000), len(files))
    for path, number in zip(files, numbers, strict=True):
        place = shuffled / f"part{number % 3}"
        place.mkdir(exist_ok=True)
        shutil.copy(path, place / f"x{number}")
    second = run_study([shuffled], regions=clean_study.labels, out=tmp_path / "two")
    assert hashes(first.folder) == hashes(second.folder)
    assert first.folder.name == second.folder.name


def test_a_second_run_resumes_only_what_would_be_the_same(
    clean_study: MadeStudy, tmp_path: Path
) -> None:
    def run(**options: object) -> bool:
        return run_study(
            [clean_study.images],
            regions=clean_study.labels,
            out=tmp_path,
            resume=True,
            **options,  # type: ignore[arg-type]
        ).was_done

    assert run() is False
    assert run() is True
    assert run(identity="key") is False
    (folder,) = [p for p in tmp_path.iterdir() if len(p.name) == 16]
    assert run(identity="key") is True
    (folder / "regions.csv").write_text("changed by hand", encoding="ascii")
    assert verify_folder(folder)
    assert run(identity="key") is False
    assert verify_folder(folder) == ()


def test_the_input_is_never_changed(clean_study: MadeStudy, tmp_path: Path) -> None:
    before = hashes(clean_study.folder)
    run_study([clean_study.folder], out=tmp_path)
    assert hashes(clean_study.folder) == before


def plant(dataset: pydicom.Dataset) -> None:
    dataset.PatientName = f"{PLANTED[0]}^{PLANTED[1]}"
    dataset.PatientID = PLANTED[2]
    dataset.AccessionNumber = PLANTED[3]
    dataset.ReferringPhysicianName = PLANTED[4]
    dataset.PatientBirthDate = "19770911"


@pytest.mark.parametrize("is_refused", [False, True])
def test_nobodys_name_gets_out(
    tmp_path: Path, capfd: pytest.CaptureFixture[str], is_refused: bool
) -> None:
    # Faults sheet, K1 and K3: outputs, names of files, both streams. The report may name the
    # patient where identity is full, and then only the report.
    study = make_coarse(tmp_path / "study")
    edit(study.images, plant)
    images = study.images.rename(tmp_path / f"{PLANTED[0]}_{PLANTED[2]}")
    if is_refused:
        edit(images, lambda d: setattr(d, "ScanningSequence", "SE"))
    out = tmp_path / "out"
    call = ["run", str(images), "--regions", str(study.labels), "--out", str(out)]
    for options in ((), ("--json",), ("--identity", "key")):
        assert main([*call, *options]) == (3 if is_refused else 0)
    assert main(["inspect", str(images)]) == (3 if is_refused else 0)
    said = "".join(capfd.readouterr())
    if not is_refused:
        assert list(out.glob("*.v1/report.pdf"))
    for report in out.glob("*.v1/report.pdf"):
        report.unlink()
    for word in (*PLANTED, "19770911"):
        assert word not in said
        assert word.encode() not in all_text(out)


def test_a_wrong_call_writes_nothing(clean_study: MadeStudy, tmp_path: Path) -> None:
    out = tmp_path / "out"
    with pytest.raises(UsageError, match="does not exist"):
        run_study([tmp_path / "nowhere"], out=out)
    with pytest.raises(UsageError, match="does not exist"):
        run_study([clean_study.images], regions=tmp_path / "nowhere.nii", out=out)
    assert not out.exists()


def test_an_output_folder_that_cannot_be_written_is_told_before_the_work(
    clean_study: MadeStudy, tmp_path: Path
) -> None:
    out = tmp_path / "out"
    out.write_text("a file in the way", encoding="ascii")
    with pytest.raises(UsageError):
        run_study([clean_study.images], out=out)
    assert out.read_text(encoding="ascii") == "a file in the way"


def test_a_study_without_its_uid_goes_by_its_path(tmp_path: Path) -> None:
    made = make_coarse(tmp_path / "study")
    edit(made.folder / "images", set_tag("StudyInstanceUID", None))
    outcome = run_study([made.folder / "images"], regions=made.labels, out=tmp_path / "out")
    assert outcome.document["outcome"] == "reported"
    assert len(outcome.document["study"]["key"]) == 16
