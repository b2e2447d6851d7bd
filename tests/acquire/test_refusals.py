"""Every fault of the faults sheet that reading can see: named with file, tag and remedy.

Codes A.. and B.. are the rows of that sheet.
"""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from pydicom.dataset import Dataset

from liverfe.acquire import StackPlan, find_stacks, load_stack
from liverfe.errors import StudyRefused
from liverfe.wording import FINDING_TABLE
from tests.acquire import dicom_study as made
from tests.acquire.dicom_study import Edit, always, drop, in_one_image, put, without
from tests.acquire.judging import assert_is_the_object


def cut_rows(dataset: Dataset) -> None:
    dataset.PixelData = dataset.PixelData[:-200]


def plans_of(folder: Path, **options: Any) -> list[StackPlan]:
    return list(find_stacks([folder], **options).stacks)


@pytest.mark.parametrize(
    ("change", "code", "words"),
    [
        # A18: a spin echo or an echo-planar image in place of a gradient echo.
        (always(put(ScanningSequence="SE")), "spin-echo", ["(0018,0020)", "SE in file im"]),
        (always(put(ScanningSequence=["GR", "SE"])), "spin-echo", ["GR\\SE"]),
        (always(put(ScanningSequence=["GR", "EP"])), "echo-planar", ["(0018,0020)", "file im"]),
        # B28: elements that an anonymiser took away.
        (always(drop("EchoTime")), "echo-time-missing", ["(0018,0081)", "20 of 20", "file im"]),
        (in_one_image(drop("EchoTime")), "echo-time-missing", ["1 of 20"]),
        (always(drop("ImagePositionPatient")), "position-missing", ["(0020,0032)", "file im"]),
        (in_one_image(drop("ImagePositionPatient")), "position-missing", ["1 of 20"]),
        (always(drop("ImageOrientationPatient")), "position-missing", ["(0020,0037)"]),
        (always(put(ImageOrientationPatient=[1, 0, 0, 1, 0, 0])), "position-missing", ["no plane"]),
        (always(drop("PixelSpacing")), "position-missing", ["(0028,0030)"]),
        # B1: the shortest echo time in every image.
        (always(put(EchoTime=1.1)), "echo-time-repeated", ["4 images", "1.1 ms", "(0018,0081)"]),
        # B23: seconds for milliseconds.
        (
            lambda dataset, echo, k: put(EchoTime=made.ECHO_TIMES_MS[echo] / 1000)(dataset),
            "echo-times-out-of-range",
            ["0.0011", "between 0.3 and 100 ms", "(0018,0081)"],
        ),
        # B9: holes.
        (
            without(1, 2),
            "holes-in-echo-table",
            ["1 images are missing", "2.3 ms", "27.5", "file im"],
        ),
        (lambda dataset, e, s: e < 3 and e != s % 3, "no-complete-slice", ["no slice has all"]),
        # One echo only.
        (lambda dataset, e, s: e == 2, "one-echo", ["3.5 ms", "file im"]),
        # B15 and B20: bits and lengths that contradict each other.
        (always(put(HighBit=15)), "pixel-format-contradicts", ["12 stored, high bit 15"]),
        (always(put(BitsAllocated=12)), "pixel-format-contradicts", ["12 bits allocated"]),
        (always(put(Rows=48)), "pixel-data-length", ["1536 bytes", "need 3072", "(7FE0,0010)"]),
        (in_one_image(cut_rows), "pixel-data-length", ["1336 bytes", "need 1536"]),
        # A patient's images under another's study.
        (
            in_one_image(put(PatientID="SYN-2")),
            "patients-mixed",
            ["(0010,0020)", "Study Instance UID"],
        ),
        (in_one_image(put(MagneticFieldStrength=3)), "field-differs", ["1.5 T and 3 T"]),
        # Several coils in one series (standards sheet 1.4).
        (always(put(RescaleSlope=0)), "rescale-slope-zero", ["(0028,1053)"]),
    ],
)
def test_a_fault_in_the_headers_is_refused_with_file_tag_and_remedy(
    tmp_path: Path, change: made.Change, code: str, words: list[str]
) -> None:
    (plan,) = plans_of(made.write_study(tmp_path, change=change))
    assert plan.refusal is not None
    assert plan.refusal.code == code
    assert plan.verdict == (
        "repeat" if code in ("holes-in-echo-table", "no-complete-slice") else "refused"
    )
    for word in words:
        assert word in plan.refusal.text
    assert len(plan.refusal.remedy) > 15


def test_holes_can_be_loaded_by_a_caller_who_decides_so(tmp_path: Path) -> None:
    (plan,) = plans_of(made.write_study(tmp_path, change=without(1, 2)))
    stack = load_stack(plan).stack
    assert stack.present is not None
    assert np.argwhere(~stack.present).tolist() == [[1, 2]]
    wanted = made.expected_magnitude(made.stored_object())
    assert np.isnan(stack.magnitude[:, :, 2, 1]).all()
    wanted[:, :, 2, 1] = np.nan
    np.testing.assert_array_equal(stack.magnitude, wanted)


def test_slices_missing_altogether_keep_their_place_and_are_named(tmp_path: Path) -> None:
    (plan,) = plans_of(made.write_study(tmp_path, change=lambda dataset, e, s: s != 2))
    assert plan.verdict == "usable"
    assert [f.code for f in plan.findings] == ["slices-missing"]
    assert "27.5 mm" in plan.findings[0].text
    stack = load_stack(plan).stack
    np.testing.assert_allclose(stack.grid.affine_mm, made.expected_affine(), atol=1e-5)
    assert stack.complete_slices.tolist() == [True, True, False, True, True]


def test_uneven_slices_are_flagged_and_scattered_ones_refused(tmp_path: Path) -> None:
    """B27; the first by 1 mm of 7.5, the second by 3."""
    for off_mm, code in ((1.0, "uneven-slice-gaps"), (3.0, "slices-not-a-stack")):

        def shift(dataset: Dataset, echo: int, k: int, off_mm: float = off_mm) -> None:
            place = made.CORNER_MM + (k * made.GAP_MM + (off_mm if k == 2 else 0)) * made.NORMAL
            dataset.ImagePositionPatient = [f"{value:.6f}" for value in place]

        (plan,) = plans_of(made.write_study(tmp_path / code, change=shift))
        assert code in {finding.code for finding in plan.findings}
        assert (plan.refusal is None) == (off_mm == 1.0)


def test_repeats_that_nothing_tells_apart_are_refused(tmp_path: Path) -> None:
    def timeless(dataset: Dataset, echo: int, k: int) -> None:
        del dataset.AcquisitionTime, dataset.AcquisitionNumber

    made.write_study(tmp_path, run=1, change=timeless)
    made.write_study(tmp_path, made.stored_object(9), run=2, change=timeless, prefix="b")
    (plan,) = plans_of(tmp_path)
    assert plan.refusal is not None
    assert plan.refusal.code == "repeats-unseparated"
    with pytest.raises(StudyRefused, match="nor time tells them apart"):
        load_stack(plan)


def test_uncombined_coils_are_refused(tmp_path: Path) -> None:
    for n, coil in enumerate(("H1", "H2"), start=1):

        def label(dataset: Dataset, echo: int, k: int, coil: str = coil) -> None:
            dataset.AcquisitionNumber = 1
            block = dataset.private_block(0x0051, "SIEMENS MR HEADER", create=True)
            block.add_new(0x0F, "LO", coil)

        made.write_study(tmp_path, run=n, change=label, prefix=coil)
    (plan,) = plans_of(tmp_path)
    assert plan.refusal is not None
    assert plan.refusal.code == "coils-uncombined"


def test_one_uid_on_two_different_images_is_refused(tmp_path: Path) -> None:
    """B8."""
    made.write_study(tmp_path)
    made.write_study(tmp_path, made.stored_object(9), prefix="other")
    plans = plans_of(tmp_path)
    assert {plan.refusal.code for plan in plans if plan.refusal} == {"same-uid-different-image"}
    assert "(0008,0018)" in str(plans[0].refusal)


def test_studies_are_never_joined(tmp_path: Path) -> None:
    made.write_study(tmp_path, change=lambda d, e, s: e < 2)
    made.write_study(
        tmp_path,
        prefix="b",
        change=lambda d, e, s: (put(StudyInstanceUID=f"{made.ROOT}.2")(d), e >= 2)[1],
    )
    survey = find_stacks([tmp_path])
    assert sorted(len(plan.echo_times_ms) for plan in survey.stacks) == [2, 2]
    assert [finding.code for finding in survey.findings] == ["several-studies"]


# ------------------------------------------------------------------------------------- cautions


@pytest.mark.parametrize(
    ("edit", "code"),
    [
        (put(ContrastBolusAgent="Invented agent"), "contrast-agent"),
        (put(LossyImageCompression="01"), "lossy-compression"),
        (put(ImageType=["DERIVED", "PRIMARY", "M", "ND"]), "derived-images"),
        (put(ImageType=["ORIGINAL", "PRIMARY", "M", "FIL"]), "filtered-images"),
        (put(ImageType=["ORIGINAL", "PRIMARY", "OTHER"]), "image-kind-not-stated"),
        (drop("ScanningSequence"), "sequence-not-stated"),
        (put(ImagingFrequency=127.7), "field-conflict"),
    ],
)
def test_a_doubt_becomes_a_caution_and_the_stack_stands(
    tmp_path: Path, edit: Edit, code: str
) -> None:
    (plan,) = plans_of(made.write_study(tmp_path, change=always(edit)))
    assert plan.verdict == "usable"
    assert [(f.code, f.level) for f in plan.findings] == [(code, "caution")]
    assert_is_the_object(load_stack(plan).stack)


def test_no_contrast_agent_is_no_caution(tmp_path: Path) -> None:
    (plan,) = plans_of(made.write_study(tmp_path, change=always(put(ContrastBolusAgent="NONE"))))
    assert plan.findings == ()


def test_an_echo_that_is_absent_everywhere_is_flagged(tmp_path: Path) -> None:
    """B6: 1.1 2.3 3.5 [4.7] 5.9 7.1 ms."""
    stored = np.repeat(made.stored_object()[:1], 6, axis=0)
    times = [1.1, 2.3, 3.5, 4.7, 5.9, 7.1]

    def change(dataset: Dataset, echo: int, k: int) -> bool:
        dataset.EchoTime = times[echo]
        return echo != 3

    made.ECHO_TIMES_MS, kept = (*made.ECHO_TIMES_MS, 0.0, 0.0), made.ECHO_TIMES_MS
    try:
        (plan,) = plans_of(made.write_study(tmp_path, stored, change=change))
    finally:
        made.ECHO_TIMES_MS = kept
    assert [finding.code for finding in plan.findings] == ["echo-time-gap"]
    assert "between 3.5 and 5.9 ms" in plan.findings[0].text


def test_a_missing_field_is_noted_and_never_filled_in(tmp_path: Path) -> None:
    folder = made.write_study(
        tmp_path, change=always(drop("MagneticFieldStrength", "ImagingFrequency"))
    )
    (plan,) = plans_of(folder)
    assert plan.verdict == "usable"
    assert plan.acquisition.field_strength_t is None
    assert [(f.code, f.level) for f in plan.findings] == [("field-missing", "note")]
    assert "(0018,0087)" in plan.findings[0].text
    (plan,) = plans_of(folder, field_strength_t=1.5)
    assert plan.acquisition.field_strength_t == 1.5
    assert [f.code for f in plan.findings] == ["field-given"]


def test_a_stated_field_that_contradicts_the_files_is_refused(tmp_path: Path) -> None:
    (plan,) = plans_of(made.write_study(tmp_path), field_strength_t=3.0)
    assert plan.refusal is not None
    assert plan.refusal.code == "field-given-conflict"


# --------------------------------------------------------------------- echo times that are given


def test_given_echo_times_order_images_by_echo_number_never_by_name(tmp_path: Path) -> None:
    def shortest(dataset: Dataset, echo: int, k: int) -> None:
        dataset.EchoTime = 1.1
        dataset.EchoNumbers = echo + 1

    folder = made.write_study(tmp_path, change=shortest)
    (plan,) = plans_of(folder, echo_times_ms=made.ECHO_TIMES_MS)
    assert [finding.code for finding in plan.findings] == ["echo-times-given"]
    assert "(0018,0086)" in plan.findings[0].text
    assert_is_the_object(load_stack(plan).stack)


@pytest.mark.parametrize(
    ("edit", "given", "code"),
    [
        (put(EchoTime=1.1), made.ECHO_TIMES_MS, "echo-order-unknown"),
        (put(EchoTime=1.1), (1.0, 2.0, 3.0), "echo-times-count"),
        (put(), (1.0, 2.0, 3.0, 4.0), "echo-times-conflict"),
    ],
)
def test_given_echo_times_that_do_not_fit_are_refused(
    tmp_path: Path, edit: Edit, given: tuple[float, ...], code: str
) -> None:
    (plan,) = plans_of(made.write_study(tmp_path, change=always(edit)), echo_times_ms=given)
    assert code in {finding.code for finding in plan.findings if finding.level == "stop"}


@pytest.mark.parametrize("token", ["P", "R", "T2_STAR_MAP"])
def test_a_study_without_magnitude_is_refused_saying_what_is_there(
    tmp_path: Path, token: str
) -> None:
    change = always(put(ImageType=["ORIGINAL", "PRIMARY", token]))
    (plan,) = plans_of(made.write_study(tmp_path, change=change))
    assert plan.refusal is not None
    assert plan.refusal.code == "no-magnitude"
    kind = {"P": "phase", "R": "real"}.get(token, "derived")
    assert f"only: {kind}" in plan.refusal.text
    with pytest.raises(StudyRefused):
        load_stack(plan)


def test_a_single_slice_without_any_thickness_is_refused(tmp_path: Path) -> None:
    def one_slice(dataset: Dataset, echo: int, k: int) -> bool:
        drop("SliceThickness", "SpacingBetweenSlices")(dataset)
        return k == 0

    (plan,) = plans_of(made.write_study(tmp_path, change=one_slice))
    assert plan.refusal is not None
    assert plan.refusal.code == "slice-distance-missing"


def test_a_single_slice_takes_its_stated_spacing(tmp_path: Path) -> None:
    (plan,) = plans_of(made.write_study(tmp_path, change=lambda d, e, k: k == 0))
    assert plan.verdict == "usable"
    assert plan.grid is not None
    np.testing.assert_allclose(plan.grid.affine_mm, made.expected_affine(), atol=1e-5)


def test_an_echo_that_two_repeats_could_own_is_joined_with_a_caution(tmp_path: Path) -> None:
    """Series 4 and 5 both hold echo 1; each further series could belong to either."""
    made.write_study(tmp_path, series_of_echo=lambda echo: 4 + 2 * echo)
    made.write_study(
        tmp_path, series_of_echo=lambda echo: 5, change=lambda d, e, k: e == 0, prefix="b"
    )
    plans = plans_of(tmp_path)
    assert [len(plan.echo_times_ms) for plan in plans] == [4, 1]
    assert "join-ambiguous" in {finding.code for finding in plans[0].findings}


def test_real_world_maps_that_contradict_the_rescale_slopes_are_a_caution(tmp_path: Path) -> None:
    def mapped(dataset: Dataset, echo: int, k: int) -> None:
        item = Dataset()
        item.RealWorldValueSlope, item.RealWorldValueIntercept = 1.0 + echo, 0.0
        dataset.RealWorldValueMappingSequence = [item]

    (plan,) = plans_of(made.write_study(tmp_path, change=mapped))
    assert [f.code for f in plan.findings] == ["real-world-map-differs"]
    assert_is_the_object(load_stack(plan).stack)


def test_every_finding_that_reading_can_raise_has_its_words(repository: Path) -> None:
    raised = {
        code
        for path in (repository / "liverfe" / "acquire").rglob("*.py")
        for code in re.findall(r'Finding\.of\(\s*"([a-z0-9-]+)"', path.read_text("utf-8"))
    }
    assert len(raised) > 40
    assert raised <= set(FINDING_TABLE)


def test_a_component_that_contradicts_the_image_type_is_not_believed(tmp_path: Path) -> None:
    """ImageType says phase, (0008,9208) says magnitude: one of the two lies."""

    def contradict(dataset: Dataset, echo: int, k: int) -> None:
        dataset.ImageType = ["ORIGINAL", "PRIMARY", "P", "ND"]
        dataset.ComplexImageComponent = "MAGNITUDE"

    (plan,) = plans_of(made.write_study(tmp_path, change=contradict))
    doubts = {finding.level for finding in (*plan.findings, *filter(None, [plan.refusal]))}
    assert doubts & {"caution", "stop"}
