"""One object in every layout gives one stack: values, order and places."""

from __future__ import annotations

import struct
from pathlib import Path
from typing import Any

import numpy as np
import pydicom
import pytest
from numpy.typing import NDArray
from pydicom.dataset import Dataset
from pydicom.sequence import Sequence
from pydicom.uid import (
    ExplicitVRBigEndian,
    ImplicitVRLittleEndian,
    JPEG2000Lossless,
    JPEGLosslessSV1,
    JPEGLSLossless,
    RLELossless,
)

from liverfe.acquire import find_stacks, load_stack
from tests.acquire import dicom_study as made
from tests.acquire.judging import assert_is_the_object, only_plan, squeeze

pytestmark = pytest.mark.slow

# ------------------------------------------------------------------------------- classic DICOM


def test_all_echoes_in_one_series_whatever_the_files_are_called(tmp_path: Path) -> None:
    for seed in (1, 2):
        plan = only_plan(made.write_study(tmp_path / str(seed), seed=seed))
        assert plan.verdict == "usable"
        assert "all echoes in series 4" in plan.layout
        loaded = load_stack(plan)
        assert_is_the_object(loaded.stack)
        assert loaded.stack.findings == ()


def test_one_series_an_echo_is_joined_and_said_so(tmp_path: Path) -> None:
    plan = only_plan(made.write_study(tmp_path, series_of_echo=lambda echo: 9 - echo))
    assert "one series an echo: series 6, 7, 8 and 9 joined" in plan.layout
    assert [finding.code for finding in plan.findings] == ["series-joined"]
    assert_is_the_object(load_stack(plan).stack)


def test_interleaved_echo_trains_of_two_series_are_joined(tmp_path: Path) -> None:
    plan = only_plan(made.write_study(tmp_path, series_of_echo=lambda echo: 4 + echo % 2))
    assert_is_the_object(load_stack(plan).stack)


def test_series_acquired_apart_are_joined_with_a_caution(tmp_path: Path) -> None:
    def later(dataset: Dataset, echo: int, k: int) -> None:
        dataset.AcquisitionTime = f"10{15 + echo}00"

    plan = only_plan(made.write_study(tmp_path, change=later, series_of_echo=lambda echo: 4 + echo))
    assert "echoes-acquired-apart" in {finding.code for finding in plan.findings}
    assert_is_the_object(load_stack(plan).stack)


def test_series_of_another_sequence_are_not_joined(tmp_path: Path) -> None:
    def other(dataset: Dataset, echo: int, k: int) -> None:
        dataset.FlipAngle = 5 + echo

    made.write_study(tmp_path, change=other, series_of_echo=lambda echo: 4 + echo)
    survey = find_stacks([tmp_path])
    assert len(survey.stacks) == 4
    assert {plan.refusal.code for plan in survey.stacks if plan.refusal} == {"one-echo"}


def test_magnitude_is_parted_from_phase_real_and_imaginary_of_the_same_series(
    tmp_path: Path,
) -> None:
    made.write_study(tmp_path)
    kinds = {"P": "P", "R": "R", "I": "I"}
    for n, (token, prefix) in enumerate(kinds.items(), start=11):

        def change(dataset: Dataset, echo: int, k: int, token: str = token, n: int = n) -> None:
            dataset.ImageType = ["ORIGINAL", "PRIMARY", token, "ND"]
            dataset.SOPInstanceUID += f".{n}"

        made.write_study(tmp_path, change=change, prefix=prefix)
    plan = only_plan(tmp_path)
    assert_is_the_object(load_stack(plan).stack)
    left_out = {left.what: left.n_files for left in plan.left_out}
    assert left_out == {
        "phase images of series 4": 20,
        "real images of series 4": 20,
        "imaginary images of series 4": 20,
    }


@pytest.mark.parametrize(
    ("tag", "creator", "vr", "value"),
    [
        (0x00432F, "GEMS_PARM_01", "SS", 1),
        (0x200511, "Philips MR Imaging DD 001", "CS", "P"),
        (None, "", "", "PHASE"),
    ],
)
def test_phase_is_known_by_the_makers_private_element(
    tmp_path: Path, tag: int | None, creator: str, vr: str, value: Any
) -> None:
    """Private elements at another block than usual: found by their creator."""

    def mark(dataset: Dataset, echo: int, k: int) -> None:
        dataset.ImageType = ["ORIGINAL", "PRIMARY", "OTHER"]
        dataset.SOPInstanceUID += ".7"
        if tag is None:
            dataset.ComplexImageComponent = value
        else:
            block = dataset.private_block(tag >> 8, "SOMEONE ELSE", create=True)
            block.add_new(tag & 0xFF, "LO", "nothing")
            block = dataset.private_block(tag >> 8, creator, create=True)
            block.add_new(tag & 0xFF, vr, value)

    made.write_study(tmp_path)
    made.write_study(tmp_path, change=mark, prefix="other")
    plan = only_plan(tmp_path)
    assert [left.what for left in plan.left_out] == ["phase images of series 4"]
    assert_is_the_object(load_stack(plan).stack)


@pytest.mark.parametrize(
    ("image_type", "series"),
    [
        (["DERIVED", "PRIMARY", "M", "ND"], 4),
        (["ORIGINAL", "PRIMARY", "M", "MEAN"], 4),
        (["DERIVED", "PRIMARY", "M", "T2_STAR_MAP"], 12),
        (["DERIVED", "PRIMARY", "M", "WATER"], 12),
    ],
)
def test_images_computed_from_echoes_are_left_out(
    tmp_path: Path, image_type: list[str], series: int
) -> None:
    """Means of all echoes are written into the series by some scanners (faults sheet, B7)."""

    def computed(dataset: Dataset, echo: int, k: int) -> bool:
        dataset.ImageType = image_type
        dataset.SOPInstanceUID += ".8"
        return echo == 0

    made.write_study(tmp_path)
    made.write_study(tmp_path, change=computed, prefix="mean", series_of_echo=lambda echo: series)
    plan = only_plan(tmp_path)
    assert [(left.what, left.n_files) for left in plan.left_out] == [
        (f"derived images of series {series}", 5)
    ]
    assert_is_the_object(load_stack(plan).stack)


@pytest.mark.parametrize("told_by", ["acquisition number", "time"])
def test_repeats_become_stacks_of_their_own(tmp_path: Path, told_by: str) -> None:
    def same_number(dataset: Dataset, echo: int, k: int) -> None:
        if told_by == "time":
            dataset.AcquisitionNumber = 1

    first, second = made.stored_object(1), made.stored_object(2)
    made.write_study(tmp_path, first, run=1, change=same_number, prefix="b")
    made.write_study(tmp_path, second, run=2, change=same_number, prefix="a")
    survey = find_stacks([tmp_path])
    assert [plan.verdict for plan in survey.stacks] == ["usable", "usable"]
    assert all(told_by in plan.layout for plan in survey.stacks)
    for plan, stored in zip(survey.stacks, (first, second), strict=True):
        assert_is_the_object(load_stack(plan).stack, stored)


def test_files_that_are_there_twice_are_dropped_with_a_note(tmp_path: Path) -> None:
    made.write_study(tmp_path)
    for path in sorted(tmp_path.iterdir())[:3]:
        (tmp_path / f"copy-{path.name}").write_bytes(path.read_bytes())
    plan = only_plan(tmp_path)
    assert plan.verdict == "usable"
    assert [finding.code for finding in plan.findings] == ["duplicates-dropped"]
    assert_is_the_object(load_stack(plan).stack)


# --------------------------------------------------------------------------- transfer syntaxes


@pytest.mark.parametrize("syntax", [ImplicitVRLittleEndian, ExplicitVRBigEndian])
def test_values_of_every_native_encoding_are_read(tmp_path: Path, syntax: Any) -> None:
    def encode(dataset: Dataset, echo: int, k: int) -> None:
        dataset.file_meta.TransferSyntaxUID = syntax
        if syntax == ExplicitVRBigEndian:
            values = np.frombuffer(dataset.PixelData, "<u2").astype(">u2")
            dataset.PixelData = values.tobytes()

    plan = only_plan(made.write_study(tmp_path, change=encode))
    assert_is_the_object(load_stack(plan).stack)


def test_a_file_without_preamble_is_read(tmp_path: Path) -> None:
    folder = made.write_study(tmp_path / "whole", change=_implicit)
    bare = tmp_path / "bare"
    bare.mkdir()
    for path in folder.iterdir():
        data = path.read_bytes()
        (n_meta,) = struct.unpack("<I", data[140:144])
        (bare / path.name).write_bytes(data[144 + n_meta :])
    assert (bare / "im000").read_bytes()[:4] == b"\x08\x00\x08\x00"
    assert_is_the_object(load_stack(only_plan(bare)).stack)


def _implicit(dataset: Dataset, echo: int, k: int) -> None:
    dataset.file_meta.TransferSyntaxUID = ImplicitVRLittleEndian


@pytest.mark.parametrize("syntax", [RLELossless, JPEGLosslessSV1, JPEG2000Lossless, JPEGLSLossless])
def test_lossless_compression_changes_no_value(tmp_path: Path, syntax: Any) -> None:
    folder = made.write_study(tmp_path)
    for path in folder.iterdir():
        squeeze(path, syntax)
    plan = only_plan(folder)
    assert pydicom.dcmread(plan.sources[0].path).file_meta.TransferSyntaxUID == syntax
    assert plan.findings == ()
    assert_is_the_object(load_stack(plan).stack)


# ------------------------------------------------------------------------------ enhanced DICOM


def write_enhanced(
    path: Path, stored: NDArray[Any], *, echo_time_in: str = "MREchoSequence", slope: float = 1.0
) -> Path:
    """All images as frames of one file, in an order of their own, by their functional groups."""
    n_echoes, n_slices = stored.shape[:2]
    order = np.random.default_rng(8).permutation(n_echoes * n_slices)
    frames, values = [], []
    for n in order:
        echo, k = divmod(int(n), n_slices)
        source = made.image(stored[echo, k], echo, k)
        values.append(stored[echo, k])
        frames.append(_frame(source, echo_time_in, slope))
    dataset = made.image(stored[0, 0], 0, 0)
    for name in ("EchoTime", "ImagePositionPatient", "ImageOrientationPatient", "PixelSpacing"):
        delattr(dataset, name)
    del dataset.ScanningSequence
    dataset.SOPClassUID = dataset.file_meta.MediaStorageSOPClassUID = "1.2.840.10008.5.1.4.1.1.4.1"
    dataset.EchoPulseSequence = "GRADIENT"
    dataset.EchoPlanarPulseSequence = "NO"
    dataset.NumberOfFrames = len(frames)
    shared = Dataset()
    shared.PixelMeasuresSequence = Sequence([Dataset()])
    shared.PixelMeasuresSequence[0].PixelSpacing = [made.ROW_MM, made.COLUMN_MM]
    shared.PixelMeasuresSequence[0].SliceThickness = 6
    dataset.SharedFunctionalGroupsSequence = Sequence([shared])
    dataset.PerFrameFunctionalGroupsSequence = Sequence(frames)
    dataset.PixelData = np.stack(values).astype("<u2").tobytes()
    made.save(dataset, path)
    return path


def _frame(source: Dataset, echo_time_in: str, slope: float) -> Dataset:
    frame = Dataset()

    def group(name: str, **values: Any) -> None:
        item = Dataset()
        for keyword, value in values.items():
            setattr(item, keyword, value)
        setattr(frame, name, Sequence([item]))

    group("PlanePositionSequence", ImagePositionPatient=source.ImagePositionPatient)
    group("PlaneOrientationSequence", ImageOrientationPatient=source.ImageOrientationPatient)
    group("PixelValueTransformationSequence", RescaleSlope=slope, RescaleIntercept=0)
    group(
        "MRImageFrameTypeSequence",
        FrameType=["ORIGINAL", "PRIMARY", "T2_STAR", "NONE"],
        ComplexImageComponent="MAGNITUDE",
    )
    if echo_time_in == "MREchoSequence":
        group("MREchoSequence", EffectiveEchoTime=float(source.EchoTime))
    elif echo_time_in == "UnassignedPerFrameConvertedAttributesSequence":
        group(echo_time_in, EchoTime=source.EchoTime)
    else:
        item = Dataset()
        item.EchoTime = source.EchoTime
        block = frame.private_block(0x2005, "Philips MR Imaging DD 005", create=True)
        block.add_new(0x0F, "SQ", Sequence([item]))
    return frame


@pytest.mark.parametrize(
    "echo_time_in",
    ["MREchoSequence", "UnassignedPerFrameConvertedAttributesSequence", "private (2005,140F)"],
)
def test_frames_of_an_enhanced_file_are_placed_by_their_functional_groups(
    tmp_path: Path, echo_time_in: str
) -> None:
    write_enhanced(tmp_path / "enhanced", made.stored_object(), echo_time_in=echo_time_in)
    plan = only_plan(tmp_path)
    assert plan.n_files == 1
    loaded = load_stack(plan)
    assert_is_the_object(loaded.stack)
    assert len(loaded.inputs) == 1


def test_each_frame_of_an_enhanced_file_is_rescaled(tmp_path: Path) -> None:
    write_enhanced(tmp_path / "enhanced", made.stored_object(), slope=0.25)
    stack = load_stack(only_plan(tmp_path)).stack
    np.testing.assert_array_equal(
        stack.magnitude, made.expected_magnitude(made.stored_object()) / 4
    )
