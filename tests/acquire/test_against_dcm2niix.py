"""Our reader against an independent one: dcm2niix, on the same DICOM files."""

from __future__ import annotations

import json
import subprocess
from collections.abc import Sequence
from pathlib import Path

import dcm2niix
import nibabel as nib
import numpy as np
import pytest
from pydicom.dataset import Dataset

from liverfe.acquire import find_stacks, load_stack
from liverfe.echoes import EchoStack
from tests.acquire import dicom_study as made


def convert(folder: Path, out: Path) -> dict[float, nib.Nifti1Image]:
    """Convert a folder; images by echo time in ms, phase left out."""
    out.mkdir(parents=True)
    # -ba n: keep all facts; -z n: no compression; precise Philips scaling off, as in displayed.
    command = [dcm2niix.bin, "-ba", "n", "-z", "n", "-p", "n", "-f", "%s_%e_%t", "-o", str(out)]
    subprocess.run([*command, str(folder)], check=True, capture_output=True, timeout=120)
    found = {}
    for path in out.glob("*.nii"):
        facts = json.loads(path.with_suffix(".json").read_text())
        if "PHASE" not in facts["ImageType"]:
            found[round(facts["EchoTime"] * 1000, 6)] = nib.load(path)
    return found


def assert_same(stack: EchoStack, theirs: dict[float, nib.Nifti1Image], rtol: float) -> None:
    """Same echo times; each of our voxels lies at, and reads as, one of theirs."""
    assert sorted(theirs) == pytest.approx(list(stack.echo_times_ms), abs=1e-4)
    indices = np.argwhere(np.ones(stack.grid.shape, dtype=bool))
    places_mm = stack.grid.to_mm(indices)
    for echo, time in enumerate(sorted(theirs)):
        image = theirs[time]
        inverse = np.linalg.inv(image.affine)
        at = places_mm @ inverse[:3, :3].T + inverse[:3, 3]
        np.testing.assert_allclose(at, np.rint(at), rtol=0, atol=2e-2)
        i, j, k = np.rint(at).astype(int).T
        ours = stack.magnitude[tuple(indices.T)][:, echo]
        np.testing.assert_allclose(ours, image.get_fdata()[i, j, k], rtol=rtol, atol=1e-3)


@pytest.mark.parametrize("layout", ["one series", "one series an echo", "rescaled"])
def test_synthetic_oblique_study_reads_as_dcm2niix_reads_it(tmp_path: Path, layout: str) -> None:
    def change(dataset: Dataset, echo: int, k: int) -> None:
        dataset.Manufacturer = "SIEMENS"
        dataset.InstanceNumber = 1 + k + 100 * echo
        if layout == "rescaled":
            dataset.RescaleSlope, dataset.RescaleIntercept = 0.5, 12

    folder = made.write_study(
        tmp_path / "in",
        change=change,
        series_of_echo=(lambda echo: 4 + echo) if layout.endswith("echo") else (lambda echo: 4),
    )
    (plan,) = find_stacks([folder]).stacks
    assert_same(load_stack(plan).stack, convert(folder, tmp_path / "out"), rtol=1e-6)


@pytest.mark.needs_shared_data
@pytest.mark.parametrize(
    "folders",
    [
        ["dcm_qa_fmap/Si_2_gre_field_magph"],
        ["dcm_qa_xa30i/9001_gre_field_mapping", "dcm_qa_xa30i/9002_gre_field_mapping"],
        ["dcm_qa_table/Ph_1301_Dual-echo_iso"],
    ],
    ids=["fmap", "xa30i", "philips"],
)
def test_real_scans_read_as_dcm2niix_reads_them(
    shared_data: Path, tmp_path: Path, folders: Sequence[str]
) -> None:
    stack = load_stack(find_stacks([shared_data / name for name in folders]).stacks[0]).stack
    theirs: dict[float, nib.Nifti1Image] = {}
    for name in folders:
        theirs |= convert(shared_data / name, tmp_path / name)
    assert_same(stack, theirs, rtol=1e-5)
