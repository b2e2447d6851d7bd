"""Faults of bytes and pixel values: seen before or while they are read, never passed on.

Codes A.. and B.. are rows of the faults sheet.
"""

from __future__ import annotations

import contextlib
from pathlib import Path

import numpy as np
import pydicom
import pytest
from pydicom.dataset import Dataset
from pydicom.uid import RLELossless

from liverfe.acquire import StackPlan, find_stacks, load_stack
from liverfe.errors import Finding, StudyRefused
from tests.acquire import dicom_study as made
from tests.acquire.dicom_study import always, put
from tests.acquire.judging import only_plan, squeeze


def refusal_of(plan: StackPlan) -> Finding:
    assert plan.refusal is None
    with pytest.raises(StudyRefused) as refused:
        load_stack(plan)
    return refused.value.findings[0]


def test_values_outside_the_declared_bits_are_refused(tmp_path: Path) -> None:
    """B15: 40000 in 12 bits, which pydicom reads as 3136 without a word."""
    stored = made.stored_object()
    stored[2, 3, 4, 5] = 40000
    finding = refusal_of(only_plan(made.write_study(tmp_path, stored)))
    assert finding.code == "values-outside-bits"
    assert "40000" in finding.text
    assert "12 bits" in finding.text


def test_phase_that_no_tag_names_is_refused_for_its_sign(tmp_path: Path) -> None:
    """B10: Siemens' phase, stored 0..4095 with slope 2 and intercept -4096."""
    phase = np.random.default_rng(1).integers(0, 4096, made.stored_object().shape)
    folder = made.write_study(
        tmp_path, phase, change=always(put(RescaleSlope=2, RescaleIntercept=-4096))
    )
    assert refusal_of(only_plan(folder)).code == "signed-values"


def test_a_first_echo_that_is_cut_off_is_refused(tmp_path: Path) -> None:
    """A12: clipped at 60 % of S0, which turns 5 mg/g into 4.1."""
    stored = np.minimum(made.stored_object(), 900)
    finding = refusal_of(only_plan(made.write_study(tmp_path, stored)))
    assert finding.code == "image-saturated"
    assert "900" in finding.text


def test_a_few_voxels_at_the_end_of_the_range_are_a_caution_only(tmp_path: Path) -> None:
    rng = np.random.default_rng(2)
    stored = np.concatenate([rng.integers(100, 4060, (1, 5, 96, 96))] * 4).astype(float)
    stored *= np.array([1.0, 0.9, 0.8, 0.7])[:, None, None, None]
    stored[:2, 0, 0, :30] = 4095
    plan = only_plan(made.write_study(tmp_path, stored))
    findings = load_stack(plan).stack.findings
    assert [(f.code, f.level) for f in findings] == [("some-voxels-saturated", "caution")]
    assert "30 voxels" in findings[0].text


def test_a_noiseless_object_that_fills_the_range_is_not_taken_for_saturated(
    tmp_path: Path,
) -> None:
    """A uniform object decays from its maximum: its first echo alone ends there."""
    stored = np.full((4, 5, 24, 32), 4095.0) * np.array([1, 0.8, 0.6, 0.4])[:, None, None, None]
    assert load_stack(only_plan(made.write_study(tmp_path, stored))).stack.findings == ()


def test_echo_times_in_reverse_are_refused_since_the_signal_rises(tmp_path: Path) -> None:
    """B4."""
    plan = only_plan(made.write_study(tmp_path, made.stored_object()[::-1]))
    finding = refusal_of(plan)
    assert finding.code == "image-signal-rises"


# ------------------------------------------------------------------------------- damaged files


def any_file(folder: Path) -> Path:
    return sorted(folder.iterdir())[7]


def test_cut_off_pixels_are_seen_before_any_is_read(tmp_path: Path) -> None:
    """B18: pydicom reads the header of such a file in silence."""
    path = any_file(made.write_study(tmp_path))
    path.write_bytes(path.read_bytes()[:-700])
    plan = only_plan(tmp_path)
    assert plan.refusal is not None
    assert plan.refusal.code == "pixel-data-truncated"
    assert path.name in plan.refusal.text
    assert "836 bytes" in plan.refusal.text
    assert "1536 are needed" in plan.refusal.text


@pytest.mark.parametrize("share_kept", [0.2, 0.5, 0.99])
def test_a_cut_off_header_is_listed_as_damaged_and_leaves_a_hole(
    tmp_path: Path, share_kept: float
) -> None:
    """B19: pydicom gives an empty data set and no error."""
    path = any_file(made.write_study(tmp_path))
    data = path.read_bytes()
    path.write_bytes(data[: int(share_kept * data.index(b"\xe0\x7f\x10\x00OW"))])
    survey = find_stacks([tmp_path])
    (finding,) = survey.findings
    assert (finding.code, finding.level) == ("damaged-file", "caution")
    assert path.name in finding.text
    assert [left.what for left in survey.left_out] == ["damaged files"]
    assert survey.stacks[0].refusal is not None
    assert survey.stacks[0].refusal.code == "holes-in-echo-table"


def test_pixels_of_four_gibibytes_that_are_not_there_are_refused(tmp_path: Path) -> None:
    """B20 and B31."""
    path = any_file(made.write_study(tmp_path, change=always(put(Rows=65535, Columns=32767))))
    data = path.read_bytes()
    at = data.index(b"\xe0\x7f\x10\x00OW")
    path.write_bytes(data[: at + 8] + b"\xfe\xff\x00\xff" + data[at + 12 :])
    plan = only_plan(tmp_path)
    assert {"pixel-data-length", "too-large"} <= {finding.code for finding in plan.findings}


def test_compressed_data_that_are_broken_are_refused(tmp_path: Path) -> None:
    folder = made.write_study(tmp_path)
    for path in folder.iterdir():
        squeeze(path, RLELossless)
    path = any_file(folder)
    data = path.read_bytes()
    path.write_bytes(data[:-600])
    finding = refusal_of(only_plan(folder))
    assert finding.code == "pixels-unreadable"
    assert path.name in finding.text


def test_a_syntax_without_decoder_is_refused_naming_the_package(tmp_path: Path) -> None:
    """B17; HTJ2K is the one that gdcm does not decode (standards sheet 1.1)."""

    def pretend(dataset: Dataset, echo: int, k: int) -> None:
        dataset.PixelData = pydicom.encaps.encapsulate([b"\xff\x4f" * 8])
        dataset["PixelData"].is_undefined_length = True
        dataset["PixelData"].VR = "OB"
        dataset.file_meta.TransferSyntaxUID = "1.2.840.10008.1.2.4.201"

    plan = only_plan(made.write_study(tmp_path, change=pretend))
    assert plan.refusal is not None
    assert plan.refusal.code == "no-decoder"
    assert "python-gdcm" in plan.refusal.remedy


def test_a_deflated_file_is_not_unpacked(tmp_path: Path) -> None:
    """B32: 0.39 MiB can become 400 MiB before anyone can look."""

    def deflate(dataset: Dataset, echo: int, k: int) -> None:
        dataset.file_meta.TransferSyntaxUID = "1.2.840.10008.1.2.1.99"

    survey = find_stacks([made.write_study(tmp_path, change=deflate)])
    assert survey.stacks == ()
    assert len(survey.findings) == 20
    assert "Explicit VR Little Endian" in survey.findings[0].text


def test_a_file_that_changes_after_the_survey_is_refused(tmp_path: Path) -> None:
    """B34."""
    plan = only_plan(made.write_study(tmp_path))
    path = plan.sources[3].path
    dataset = pydicom.dcmread(path)
    dataset.EchoTime = "1.2"
    made.save(dataset, path)
    assert refusal_of(plan).code == "file-changed"


def test_an_enhanced_file_without_functional_groups_is_refused(tmp_path: Path) -> None:
    def enhanced(dataset: Dataset, echo: int, k: int) -> bool:
        dataset.SOPClassUID = "1.2.840.10008.5.1.4.1.1.4.1"
        return (echo, k) == (0, 0)

    plan = only_plan(made.write_study(tmp_path, change=enhanced))
    assert plan.refusal is not None
    assert plan.refusal.code in ("echo-time-missing", "position-missing")


def test_headers_with_broken_bytes_are_refused_or_read_but_never_crash(tmp_path: Path) -> None:
    """Three kinds of damage at a time, as archives and disks do; warnings count as crashes."""
    folder = made.write_study(tmp_path)
    rng = np.random.default_rng(4)
    paths = sorted(folder.iterdir())
    n_refused = 0
    for _ in range(40):
        path = paths[int(rng.integers(len(paths)))]
        whole = path.read_bytes()
        broken = bytearray(whole)
        for _ in range(3):
            place, kind = int(rng.integers(len(whole) - 1600)), rng.integers(3)
            if kind == 0:
                broken[place] = int(rng.integers(256))
            elif kind == 1:
                del broken[place : place + int(rng.integers(1, 30))]
            else:
                broken[place:place] = rng.bytes(4)
        path.write_bytes(broken)
        for plan in find_stacks([folder]).stacks:
            n_refused += plan.refusal is not None
            with contextlib.suppress(StudyRefused):
                load_stack(plan)
        path.write_bytes(whole)
    assert n_refused > 20
