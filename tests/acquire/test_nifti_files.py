"""NIfTI files that are damaged, crafted, or placed in two ways."""

from __future__ import annotations

import gzip
import json
from pathlib import Path
from typing import Any

import nibabel as nib
import numpy as np
import pytest
from numpy.typing import NDArray

from liverfe.acquire import StackPlan, find_stacks, load_stack
from liverfe.errors import StudyRefused, UsageError
from tests.acquire import dicom_study as made

DATA = made.expected_magnitude(made.stored_object()).astype(np.int16)
GIVEN: dict[str, Any] = {"echo_times_ms": made.ECHO_TIMES_MS, "field_strength_t": 1.5}


def nifti_bytes(data: NDArray[Any] = DATA, **header: Any) -> bytes:
    image = nib.Nifti1Image(data, made.expected_affine())
    image.header.set_xyzt_units("mm")
    raw = bytearray(image.to_bytes())
    block = nib.Nifti1Header(bytes(raw[:348]), check=False)
    for key, value in header.items():
        block[key] = value
    raw[:348] = block.binaryblock
    return bytes(raw)


def plan_of(path: Path, **options: Any) -> StackPlan:
    (plan,) = find_stacks([path], **(GIVEN | options)).stacks
    return plan


def refusal_code(path: Path, **options: Any) -> str:
    """Code of the refusal, at the survey or at the load."""
    plan = plan_of(path, **options)
    if plan.refusal is not None:
        return plan.refusal.code
    with pytest.raises(StudyRefused) as refused:
        load_stack(plan)
    return refused.value.findings[0].code


def test_bit_rot_in_a_compressed_file_is_caught_by_its_checksum(tmp_path: Path) -> None:
    """B21: of 400 flipped bits, nibabel alone loads 320 as other numbers without an error."""
    packed = gzip.compress(nifti_bytes(), 1)
    rng = np.random.default_rng(6)
    path = tmp_path / "x.nii.gz"
    n_wrong = 0
    for place in rng.integers(600, len(packed) - 1, 60):
        broken = bytearray(packed)
        broken[place] ^= 1 << int(rng.integers(8))
        path.write_bytes(broken)
        try:
            stack = load_stack(plan_of(path)).stack
        except StudyRefused as refused:
            assert refused.findings[0].code == "nifti-damaged"  # noqa: PT017 - one of two ways
        else:
            n_wrong += not np.array_equal(stack.magnitude, DATA)
    assert n_wrong == 0


@pytest.mark.parametrize("packed", [True, False])
def test_a_cut_off_file_is_refused(tmp_path: Path, packed: bool) -> None:
    data = gzip.compress(nifti_bytes()) if packed else nifti_bytes()
    path = tmp_path / ("x.nii.gz" if packed else "x.nii")
    path.write_bytes(data[:-1000])
    assert refusal_code(path) == "nifti-damaged"


@pytest.mark.parametrize("packed", [True, False])
def test_a_header_that_asks_for_gigabytes_allocates_nothing(tmp_path: Path, packed: bool) -> None:
    """B31: a file of 377 bytes that asks for 18 GB."""
    data = nifti_bytes(dim=[4, 30000, 30000, 5, 4, 1, 1, 1])[:377]
    path = tmp_path / "x.nii"
    path.write_bytes(gzip.compress(data) if packed else data)
    assert refusal_code(path) == "nifti-damaged"


def test_a_bomb_behind_the_values_is_not_unpacked(tmp_path: Path) -> None:
    path = tmp_path / "x.nii.gz"
    path.write_bytes(gzip.compress(nifti_bytes() + b"\0" * (80 << 20)))
    assert refusal_code(path) == "nifti-damaged"


@pytest.mark.parametrize(
    ("data", "code"),
    [
        (DATA.astype(np.complex64), "nifti-unsupported"),
        (np.zeros((4, 4, 4, 3, 2), np.int16), "nifti-unsupported"),
        (DATA[..., :3], "echo-times-count"),
        (DATA[..., 0], "nifti-echo-times-missing"),
    ],
)
def test_data_of_another_form_are_refused(tmp_path: Path, data: NDArray[Any], code: str) -> None:
    path = tmp_path / "x.nii"
    path.write_bytes(nib.Nifti1Image(data, np.eye(4)).to_bytes())
    assert refusal_code(path) == code


def test_one_echo_time_for_one_volume_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "x.nii"
    path.write_bytes(nifti_bytes(DATA[..., 0]))
    assert refusal_code(path, echo_times_ms=[2.3]) == "one-echo"


def test_sform_is_taken_before_qform_and_a_difference_is_flagged(tmp_path: Path) -> None:
    path = tmp_path / "x.nii"
    image = nib.Nifti1Image(DATA, made.expected_affine())
    image.set_sform(made.expected_affine(), 1)
    moved = made.expected_affine()
    moved[:3, 3] += (0.0, 4.0, 0.0)
    image.set_qform(moved, 1)
    nib.save(image, path)
    plan = plan_of(path)
    assert plan.grid is not None
    np.testing.assert_allclose(plan.grid.affine_mm, made.expected_affine(), atol=1e-5)
    finding = next(f for f in plan.findings if f.code == "sform-qform-differ")
    assert finding.level == "caution"
    assert "4.0 mm" in finding.text


def test_qform_serves_where_no_sform_is_set(tmp_path: Path) -> None:
    path = tmp_path / "x.nii"
    image = nib.Nifti1Image(DATA, made.expected_affine())
    image.set_qform(made.expected_affine(), 1)
    image.set_sform(None, 0)
    nib.save(image, path)
    plan = plan_of(path)
    assert plan.grid is not None
    np.testing.assert_allclose(plan.grid.affine_mm, made.expected_affine(), atol=1e-4)
    assert [finding.code for finding in plan.findings] == ["echo-times-given", "field-given"]


def test_without_qform_and_sform_voxel_sizes_serve_and_a_caution_says_so(tmp_path: Path) -> None:
    path = tmp_path / "x.nii"
    path.write_bytes(nifti_bytes(sform_code=0, qform_code=0))
    plan = plan_of(path)
    assert plan.grid is not None
    assert plan.grid.voxel_size_mm == pytest.approx((made.COLUMN_MM, made.ROW_MM, made.GAP_MM))
    assert ("position-not-stated", "caution") in [(f.code, f.level) for f in plan.findings]
    np.testing.assert_array_equal(load_stack(plan).stack.magnitude, DATA)


def test_places_in_metres_become_millimetres(tmp_path: Path) -> None:
    affine = made.expected_affine()
    affine[:3] /= 1000.0
    image = nib.Nifti1Image(DATA, affine)
    image.header.set_xyzt_units("meter")
    nib.save(image, tmp_path / "x.nii")
    plan = plan_of(tmp_path / "x.nii")
    assert plan.grid is not None
    np.testing.assert_allclose(plan.grid.affine_mm, made.expected_affine(), atol=1e-4)


# ------------------------------------------------------------------------------------ sidecars


def write_echoes(folder: Path, sidecars: list[dict[str, Any]]) -> None:
    for e, sidecar in enumerate(sidecars):
        (folder / f"scan_e{e}.nii").write_bytes(nifti_bytes(DATA[..., e]))
        (folder / f"scan_e{e}.json").write_text(json.dumps(sidecar))


@pytest.mark.parametrize(
    ("extra", "code"),
    [
        ({"ScanningSequence": "SE"}, "spin-echo"),
        ({"PulseSequenceType": "Turbo Spin Echo"}, "spin-echo"),
        ({"ScanningSequence": "EP_GR"}, "echo-planar"),
        ({"EchoTime": 1.1}, "nifti-echo-repeated"),
        ({"ImageType": ["ORIGINAL", "PRIMARY", "P", "ND"]}, "no-magnitude"),
    ],
)
def test_what_a_sidecar_says_against_a_stack_is_heard(
    tmp_path: Path, extra: dict[str, Any], code: str
) -> None:
    write_echoes(tmp_path, [{"EchoTime": t / 1000} | extra for t in made.ECHO_TIMES_MS])
    (plan,) = find_stacks([tmp_path]).stacks
    assert plan.refusal is not None
    assert plan.refusal.code == code


def test_milliseconds_in_a_sidecar_are_refused_not_divided(tmp_path: Path) -> None:
    """B23: EchoTime of a sidecar is in seconds."""
    write_echoes(tmp_path, [{"EchoTime": t} for t in made.ECHO_TIMES_MS])
    (plan,) = find_stacks([tmp_path]).stacks
    assert plan.refusal is not None
    assert plan.refusal.code == "echo-times-out-of-range"
    assert "JSON sidecar wants seconds" in plan.refusal.remedy


def test_echoes_on_different_grids_are_refused(tmp_path: Path) -> None:
    anat = tmp_path / "anat"
    anat.mkdir()
    for e, time in enumerate(made.ECHO_TIMES_MS):
        affine = made.expected_affine()
        affine[0, 3] += 3.0 * (e == 2)
        image = nib.Nifti1Image(DATA[..., e], affine)
        nib.save(image, anat / f"sub-1_echo-{e + 1}_MEGRE.nii")
        (anat / f"sub-1_echo-{e + 1}_MEGRE.json").write_text(json.dumps({"EchoTime": time / 1000}))
    (plan,) = find_stacks([anat]).stacks
    assert plan.refusal is not None
    assert plan.refusal.code == "nifti-echoes-differ"
    assert "echo-3" in plan.refusal.text


def test_a_broken_sidecar_is_refused(tmp_path: Path) -> None:
    (tmp_path / "x.nii").write_bytes(nifti_bytes())
    (tmp_path / "x.json").write_text('{"EchoTime": [0.001,')
    assert refusal_code(tmp_path / "x.nii") == "sidecar-unreadable"


def test_runs_become_stacks_of_their_own(tmp_path: Path) -> None:
    sidecars = [
        {"EchoTime": time / 1000, "SeriesNumber": series}
        for series in (3, 7)
        for time in made.ECHO_TIMES_MS[:2]
    ]
    write_echoes(tmp_path, sidecars)
    survey = find_stacks([tmp_path])
    assert [plan.verdict for plan in survey.stacks] == ["usable", "usable"]
    assert [plan.n_files for plan in survey.stacks] == [2, 2]


@pytest.mark.parametrize("times", [[], [1.0, -2.0], [2.0, 1.0], [1.0, 1.0], [float("nan")]])
def test_senseless_echo_times_are_a_wrong_call(tmp_path: Path, times: list[float]) -> None:
    with pytest.raises(UsageError):
        find_stacks([tmp_path], echo_times_ms=times)
    with pytest.raises(UsageError):
        find_stacks([tmp_path], field_strength_t=-1.5)
    with pytest.raises(UsageError):
        find_stacks([tmp_path / "absent"])


def test_sidecars_are_listed_among_the_files_that_were_read(tmp_path: Path) -> None:
    write_echoes(tmp_path, [{"EchoTime": t / 1000} for t in made.ECHO_TIMES_MS])
    loaded = load_stack(find_stacks([tmp_path]).stacks[0])
    assert [file.path.name for file in loaded.inputs] == sorted(
        f"scan_e{e}.{kind}" for e in range(4) for kind in ("nii", "json")
    )
