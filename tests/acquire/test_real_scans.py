"""Real scans: the R2* and the verdicts of their README, from DICOM and from NIfTI alike.

Expected numbers: `README.md` of the shared data, computed there from stored value x slope +
intercept with R2* = -slope of ln S against TE, without this package.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from liverfe.acquire import Survey, find_regions, find_stacks, load_stack, read_regions
from liverfe.echoes import EchoStack
from liverfe.errors import StudyRefused
from liverfe.outlines import rasterise

pytestmark = pytest.mark.needs_shared_data

FMAP = (["dcm_qa_fmap/Si_2_gre_field_magph", "dcm_qa_fmap/Si_3_gre_field_magph"], "dcm_qa_fmap")
XA30 = (
    [
        "dcm_qa_xa30i/9001_gre_field_mapping",
        "dcm_qa_xa30i/9002_gre_field_mapping",
        "dcm_qa_xa30i/10001_gre_field_mapping",
    ],
    "dcm_qa_xa30i",
)
PHILIPS = (["dcm_qa_table/Ph_1301_Dual-echo_iso"], "dcm_qa_table")


def survey_of(root: Path, names: Sequence[str]) -> Survey:
    return find_stacks([root / name for name in names])


def log_linear_r2star_per_s(
    signal: NDArray[np.float64], echo_times_ms: NDArray[np.float64]
) -> NDArray[np.float64]:
    """-slope of ln S against TE, as the README states; S along the last axis."""
    times_s = echo_times_ms / 1000.0
    centred = times_s - times_s.mean()
    return np.asarray(-(np.log(signal) @ centred) / (centred @ centred))


def mask_median(stack: EchoStack) -> float:
    first = stack.magnitude[..., 0]
    mask = first > 0.3 * np.percentile(first, 99.5)
    signal = stack.magnitude[mask].astype(np.float64)
    return float(np.median(log_linear_r2star_per_s(signal, stack.echo_times_ms)))


@pytest.mark.parametrize(
    ("scan", "mask", "tolerance", "box", "echo_means", "voxel_median", "of_the_means"),
    [
        (FMAP, 13.9, 0.3, np.s_[26:42, 26:42, 14:22], (3629.5, 3507.3), 13.95, 13.93),
        (XA30, 23.65, 0.3, np.s_[22:42, 40:52, 12:20], (1551.4, 1464.8), 23.30, 23.33),
        (PHILIPS, 77.75, 0.5, np.s_[32:56, 18:42, 10:20], (1639.4, 1300.7), 76.99, 77.16),
    ],
    ids=["fmap", "xa30i", "philips"],
)
def test_r2star_of_the_readme_comes_out_of_dicom_and_nifti(
    shared_data: Path,
    scan: tuple[list[str], str],
    mask: float,
    tolerance: float,
    box: tuple[slice, slice, slice],
    echo_means: tuple[float, float],
    voxel_median: float,
    of_the_means: float,
) -> None:
    names, folder = scan
    dicom = load_stack(survey_of(shared_data, names).stacks[0]).stack
    nifti = load_stack(survey_of(shared_data, [f"{folder}/ref_nifti"]).stacks[0]).stack
    assert mask_median(dicom) == pytest.approx(mask, abs=tolerance)
    # "From DICOM and from ref_nifti the medians agree to 0.01."
    assert mask_median(nifti) == pytest.approx(mask_median(dicom), abs=0.01)
    means = dicom.magnitude[box].mean(axis=(0, 1, 2), dtype=np.float64)
    assert means == pytest.approx(echo_means, abs=0.06)
    assert float(log_linear_r2star_per_s(means, dicom.echo_times_ms)) == pytest.approx(
        of_the_means, abs=0.02
    )
    voxels = log_linear_r2star_per_s(dicom.magnitude[box].astype(float), dicom.echo_times_ms)
    assert float(np.median(voxels)) == pytest.approx(voxel_median, abs=0.02)


@pytest.mark.parametrize("scan", [FMAP, XA30, PHILIPS], ids=["fmap", "xa30i", "philips"])
def test_a_box_drawn_on_the_nifti_grid_meets_the_same_voxels_in_dicom(
    shared_data: Path, scan: tuple[list[str], str]
) -> None:
    """The label images lie on the grid of ref_nifti: only the affines link them to DICOM."""
    names, folder = scan
    (label_file,) = (shared_data / folder).glob("roi_*.nii.gz")
    (region,) = read_regions(label_file)
    dicom = load_stack(survey_of(shared_data, names).stacks[0]).stack
    nifti = load_stack(survey_of(shared_data, [f"{folder}/ref_nifti"]).stacks[0]).stack
    in_dicom, in_nifti = (rasterise(region, stack.grid) for stack in (dicom, nifti))
    assert in_dicom.sum() == in_nifti.sum() > 1000
    a = np.sort(dicom.magnitude[in_dicom].astype(np.float64), axis=0)
    b = np.sort(nifti.magnitude[in_nifti].astype(np.float64), axis=0)
    # Philips' reference is scaled by one constant; the others are the same numbers.
    np.testing.assert_allclose(
        a / a.mean(), b / b.mean(), atol=2e-2 if folder[-5:] == "table" else 1e-6
    )


def test_both_echoes_of_one_series_make_one_stack_without_the_phase(shared_data: Path) -> None:
    survey = survey_of(shared_data, FMAP[0])
    (plan,) = survey.stacks
    assert plan.verdict == survey.verdict == "usable"
    assert plan.present.shape == (2, 36)
    assert plan.present.all()
    assert plan.n_files == 72
    assert [(left.what, left.n_files) for left in survey.left_out] == [
        ("phase images of series 3", 36)
    ]
    assert plan.grid is not None
    assert plan.grid.voxel_size_mm[2] == pytest.approx(3.6, abs=1e-3), "positions, not thickness"
    assert plan.grid.slice_thickness_mm == 3.0
    # (0018,0087) says 3; 123.255 MHz / 42.577 MHz/T is 2.895 T.
    assert plan.acquisition.field_strength_t == pytest.approx(2.895, abs=1e-3)
    assert [finding.code for finding in plan.findings] == ["field-from-frequency"]


def test_a_folder_with_dicom_and_its_conversion_holds_one_stack(shared_data: Path) -> None:
    survey = find_stacks([shared_data / "dcm_qa_fmap"])
    assert len(survey.usable) == 1
    assert survey.usable[0].origin == "dicom"


def test_one_series_an_echo_is_joined_and_keeps_its_oblique_affine(shared_data: Path) -> None:
    survey = survey_of(shared_data, XA30[0])
    (plan,) = survey.stacks
    assert plan.verdict == "usable"
    assert "one series an echo: series 9001 and 9002 joined" in plan.layout
    assert "series-joined" in {finding.code for finding in plan.findings}
    assert [left.what for left in survey.left_out] == ["phase images of series 10001"]
    assert plan.grid is not None
    row = plan.grid.affine_mm[:3, 0] / 3.375
    assert row == pytest.approx([-0.991369, -0.119141, -0.0546986], abs=1e-5), "from the header"


def test_a_mixed_series_is_parted_by_component(shared_data: Path) -> None:
    (plan,) = survey_of(shared_data, PHILIPS[0]).stacks
    assert plan.verdict == "usable"
    assert plan.n_files == 60
    assert plan.present.shape == (2, 30)
    assert [(left.what, left.n_files) for left in plan.left_out] == [
        ("phase images of series 1301", 60)
    ]
    assert plan.acquisition.field_strength_t == 3.0
    assert plan.findings == ()


def test_nifti_without_echo_times_is_refused_and_asks_for_them(shared_data: Path) -> None:
    survey = find_stacks([shared_data / "brain_block" / "Mag.nii.gz"])
    (plan,) = survey.stacks
    assert plan.refusal is not None
    assert plan.refusal.code == "nifti-echo-times-missing"
    assert "Mag.nii.gz" in plan.refusal.text
    assert "--echo-times-ms" in plan.refusal.remedy


def test_nifti_with_echo_times_gives_the_r2star_of_the_readme_and_no_field(
    shared_data: Path,
) -> None:
    survey = find_stacks([shared_data / "brain_block"], echo_times_ms=[4, 8, 12])
    (plan,) = survey.stacks
    stack = load_stack(plan).stack
    assert stack.acquisition.field_strength_t is None, "never a default"
    assert mask_median(stack) == pytest.approx(32.7, abs=0.5)
    box = stack.magnitude[20:30, 20:30, 15:25].astype(np.float64)
    means = box.mean(axis=(0, 1, 2))
    assert means == pytest.approx((3.568e-4, 3.222e-4, 2.863e-4), abs=2e-7)
    assert float(log_linear_r2star_per_s(means, stack.echo_times_ms)) == pytest.approx(
        27.55, abs=0.05
    )
    (region,) = read_regions(shared_data / "brain_block" / "roi_box.nii.gz")
    inside = rasterise(region, stack.grid)
    np.testing.assert_array_equal(np.argwhere(inside).min(axis=0), (20, 20, 15))
    assert inside.sum() == 1000


def test_phase_given_as_magnitude_is_refused_for_its_sign(shared_data: Path) -> None:
    path = shared_data / "brain_block" / "Phase.nii.gz"
    (plan,) = find_stacks([path], echo_times_ms=[4, 8, 12]).stacks
    with pytest.raises(StudyRefused, match="negative") as refused:
        load_stack(plan)
    assert refused.value.findings[0].code == "signed-values"


def test_a_spin_echo_is_refused_by_tag_and_its_missing_images_are_named(
    shared_data: Path,
) -> None:
    survey = find_stacks([shared_data / "dcmstack"])
    (plan,) = survey.stacks
    assert survey.verdict == "refused"
    assert plan.refusal is not None
    assert plan.refusal.code == "spin-echo"
    assert "(0018,0020)" in plan.refusal.text
    assert "SE in file TE_" in plan.refusal.text
    holes = next(f for f in plan.findings if f.code == "holes-in-echo-table")
    assert "2 images are missing, of echo times 40, 60 ms at -2.2 mm" in holes.text


def test_an_enhanced_file_of_one_echo_is_refused_naming_the_echo_time(shared_data: Path) -> None:
    survey = find_stacks([shared_data / "dbdicom"])
    (plan,) = survey.stacks
    assert survey.verdict == "refused"
    assert plan.shape == (256, 256, 20)
    assert plan.refusal is not None
    assert plan.refusal.code == "one-echo"
    assert "1.531 ms" in plan.refusal.text


def test_no_label_image_of_the_real_sets_is_taken_for_an_echo(shared_data: Path) -> None:
    for survey in (find_stacks([shared_data / "dcm_qa_table"]),):
        used = {source.path.name for plan in survey.stacks for source in plan.sources}
        assert not {name for name in used if name.startswith("roi_")}
    assert find_regions([shared_data / "dcm_qa_table"]) == ()
