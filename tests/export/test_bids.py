"""The maps make a valid BIDS derivative: judged by the BIDS validator."""

import json
import subprocess
import sys
from pathlib import Path

import pytest

from liverfe.export import bids_dataset_files, bids_path


def bids_errors(dataset):
    """Errors of bids-validator-deno (its own schema of BIDS, bundled), by code."""
    validator = Path(sys.executable).with_name("bids-validator-deno")
    done = subprocess.run(
        [validator, "--ignoreWarnings", "--format", "json", dataset],
        capture_output=True, text=True, check=False, timeout=120,
    )  # fmt: skip
    issues = json.loads(done.stdout)["issues"]["issues"]
    found = [(i["code"], i.get("location")) for i in issues if i["severity"] == "error"]
    assert (done.returncode == 0) == (not found)
    return found


@pytest.fixture
def dataset(made, tmp_path):
    """A derivative data set of one study with two stacks."""
    for key in (made.label.key, f"{made.label.key}-2"):
        for file in made.files(made.result(), key=key):
            folder, _, name = file.path.rpartition("/")
            if folder == "maps":
                path = tmp_path / bids_path(name)
                path.parent.mkdir(parents=True, exist_ok=True)
                path.write_bytes(file.content)
    for name, content in bids_dataset_files(made.software).items():
        (tmp_path / name).write_bytes(content)
    return tmp_path


def test_maps_are_a_valid_bids_derivative(dataset):
    assert len(list(dataset.rglob("*.nii.gz"))) == 16
    assert bids_errors(dataset) == []


def test_the_validator_sees_a_fault(dataset):
    # Without .bidsignore the maps that BIDS has no name for are errors; so is a missing key.
    (dataset / ".bidsignore").unlink()
    (sidecar,) = dataset.rglob("sub-*ef_R2starmap.json")
    sidecar.write_text("{}")
    codes = {code for code, _ in bids_errors(dataset)}
    assert {"NOT_INCLUDED", "SIDECAR_KEY_REQUIRED"} <= codes


def test_dataset_description_says_derivative_and_by_whom(made):
    files = bids_dataset_files(made.software)
    description = json.loads(files["dataset_description.json"])
    assert description["DatasetType"] == "derivative"
    assert description["GeneratedBy"] == [{"Name": "liverfe", "Version": "0.1.0"}]
    assert b"Not a medical device" in files["README"]
