"""One object in every NIfTI layout gives one stack: values, order and places."""

from __future__ import annotations

import gzip
import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import nibabel as nib
import numpy as np
import pytest
from numpy.typing import NDArray

from liverfe.acquire import find_stacks, load_stack
from tests.acquire import dicom_study as made
from tests.acquire.judging import assert_is_the_object, only_plan


def save_nifti(path: Path, data: NDArray[Any], affine: NDArray[np.float64] | None = None) -> None:
    image = nib.Nifti1Image(data, made.expected_affine() if affine is None else affine)
    image.header.set_xyzt_units("mm")
    nib.save(image, path)


def write_4d(folder: Path, data: NDArray[Any]) -> dict[str, Any]:
    save_nifti(folder / "echoes.nii.gz", data)
    return {"echo_times_ms": made.ECHO_TIMES_MS, "field_strength_t": 1.5}


def write_4d_with_sidecar(folder: Path, data: NDArray[Any]) -> dict[str, Any]:
    """Echoes in an order of their own: the sidecar says which is which."""
    order = [2, 0, 3, 1]
    save_nifti(folder / "echoes.nii", data[..., order])
    times_s = [made.ECHO_TIMES_MS[e] / 1000 for e in order]
    (folder / "echoes.json").write_text(
        json.dumps({"EchoTime": times_s, "MagneticFieldStrength": 1.5})
    )
    return {}


def write_one_file_an_echo(folder: Path, data: NDArray[Any]) -> dict[str, Any]:
    for e, time in enumerate(made.ECHO_TIMES_MS):
        stem = f"scan_{'dbca'[e]}"
        save_nifti(folder / f"{stem}.nii.gz", data[..., e])
        side = {"EchoTime": time / 1000, "MagneticFieldStrength": 1.5, "SeriesNumber": 10 + e}
        (folder / f"{stem}.json").write_text(json.dumps(side))
    return {}


def write_bids(folder: Path, data: NDArray[Any]) -> dict[str, Any]:
    """Common facts stand at the root and are inherited; phase, T1w and maps lie beside."""
    anat = folder / "sub-01" / "anat"
    anat.mkdir(parents=True)
    (folder / "dataset_description.json").write_text('{"Name": "x", "BIDSVersion": "1.11.1"}')
    (folder / "MEGRE.json").write_text('{"MagneticFieldStrength": 1.5, "FlipAngle": 5}')
    for e, time in enumerate(made.ECHO_TIMES_MS, start=1):
        for part, values in (("mag", data[..., e - 1]), ("phase", -data[..., e - 1])):
            stem = f"sub-01_echo-{e}_part-{part}_MEGRE"
            save_nifti(anat / f"{stem}.nii.gz", values)
            (anat / f"{stem}.json").write_text(json.dumps({"EchoTime": time / 1000}))
    for name in ("sub-01_T1w", "sub-01_R2starmap", "sub-01_desc-rois_dseg"):
        save_nifti(anat / f"{name}.nii.gz", data[..., 0])
    return {}


@pytest.mark.parametrize(
    "write", [write_4d, write_4d_with_sidecar, write_one_file_an_echo, write_bids]
)
@pytest.mark.parametrize("kind", [np.int16, np.float32])
def test_nifti_of_every_layout_gives_the_same_stack(
    tmp_path: Path, write: Callable[[Path, NDArray[Any]], dict[str, Any]], kind: Any
) -> None:
    data = made.expected_magnitude(made.stored_object()).astype(kind)
    plan = only_plan(tmp_path, **write(tmp_path, data))
    assert plan.verdict == "usable"
    assert_is_the_object(load_stack(plan).stack)
    assert plan.acquisition.field_strength_t == 1.5


def test_a_bids_folder_lists_what_it_leaves_out(tmp_path: Path) -> None:
    write_bids(tmp_path, made.expected_magnitude(made.stored_object()))
    for given in (tmp_path, tmp_path / "sub-01", tmp_path / "sub-01" / "anat"):
        plan = only_plan(given)
        assert "BIDS MEGRE, one file an echo" in plan.layout
        assert plan.acquisition.field_strength_t == 1.5, "inherited from the data set's root"
        assert {left.what: left.n_files for left in plan.left_out} == {
            "phase image": 4,
            "BIDS T1w image": 1,
            "map or mask": 1,
            "label image": 1,
        }


def test_files_named_one_by_one_take_the_users_echo_times_in_that_order(tmp_path: Path) -> None:
    data = made.expected_magnitude(made.stored_object())
    names = [tmp_path / f"{letter}.nii.gz" for letter in "dacb"]
    for e, path in enumerate(names):
        save_nifti(path, data[..., e])
    survey = find_stacks(names, echo_times_ms=made.ECHO_TIMES_MS, field_strength_t=1.5)
    assert_is_the_object(load_stack(survey.stacks[0]).stack)
    # From a folder there is no order to go by.
    assert find_stacks([tmp_path], echo_times_ms=made.ECHO_TIMES_MS).verdict == "refused"


def test_nifti_scale_and_byte_order_are_applied_once(tmp_path: Path) -> None:
    data = made.expected_magnitude(made.stored_object())
    image = nib.Nifti1Image(data.astype(">i2"), made.expected_affine())
    raw = bytearray(image.to_bytes())
    header = nib.Nifti1Header(bytes(raw[:348]), check=False)
    header["scl_slope"], header["scl_inter"] = 0.5, 8.0
    raw[:348] = header.binaryblock
    (tmp_path / "x.nii.gz").write_bytes(gzip.compress(bytes(raw)))
    stack = load_stack(only_plan(tmp_path, echo_times_ms=made.ECHO_TIMES_MS)).stack
    np.testing.assert_array_equal(stack.magnitude, data / 2 + 8)
