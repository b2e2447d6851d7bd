"""One object gives one R2*, however its files are laid out; real scans give that of their README.

The truth is the phantom's; the numbers of real scans are those of the shared data's README, found
there without this package.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from liverfe.acquire import find_stacks, load_stack, read_regions
from liverfe.fit import ESTIMATORS, fit_r2star
from liverfe.journey import run_study
from liverfe.noise import NoiseLevel
from liverfe.outlines import rasterise
from liverfe.study import Method
from tests.journey.scans import TRUE_R2STAR_PER_S, make_coarse

LAYOUTS = [
    ("dicom", "one-series"),
    ("dicom", "series-per-echo"),
    ("dicom", "with-phase"),
    ("nifti", "4d"),
    ("nifti", "file-per-echo"),
    ("nifti", "bids"),
]


@pytest.fixture(scope="module")
def reference(tmp_path_factory: pytest.TempPathFactory) -> float:
    """R2* of the liver from the plainest layout."""
    return measured(tmp_path_factory.mktemp("reference"), "dicom", "one-series")


def measured(folder: Path, file_format: str, layout: str, **options: object) -> float:
    made = make_coarse(folder / "study", format=file_format, layout=layout, **options)
    outcome = run_study(
        [made.folder / "images"],
        regions=made.labels,
        out=folder / "out",
        method=Method(),
        # A 4-D file states its echo times in a sidecar; nothing else is said on the command line.
    )
    assert outcome.document["outcome"] == "reported"
    region = outcome.document["regions"][0]
    assert region["n_used"] > 200
    return float(region["r2star_per_s"]["value"])


@pytest.mark.parametrize(("file_format", "layout"), LAYOUTS)
def test_every_layout_of_one_object_gives_one_r2star(
    tmp_path: Path, reference: float, file_format: str, layout: str
) -> None:
    assert measured(tmp_path, file_format, layout) == pytest.approx(reference, rel=0.0005)


def test_compressed_images_give_the_same_r2star(tmp_path: Path, reference: float) -> None:
    value = measured(tmp_path, "dicom", "one-series", transfer_syntax="rle")
    assert value == pytest.approx(reference, rel=0.0005)


def test_that_r2star_is_the_truth(reference: float) -> None:
    """Median of a gamma distribution with CV 0.12: mean (1 - CV² / 3)."""
    assert reference == pytest.approx(TRUE_R2STAR_PER_S * (1.0 - 0.12**2 / 3.0), rel=0.02)


def test_a_repeat_is_a_stack_of_its_own_and_asks_for_a_choice(tmp_path: Path) -> None:
    made = make_coarse(tmp_path / "study", format="dicom", layout="repeats")
    asked = run_study(
        [made.folder / "images"], regions=made.labels, out=tmp_path / "out", method=Method()
    )
    assert asked.document["outcome"] == "refused"
    values = []
    for number in (1, 2):
        chosen = run_study(
            [made.folder / "images"],
            regions=made.labels,
            out=tmp_path / f"out-{number}",
            method=Method(),
            stack_number=number,
        )
        values.append(chosen.document["regions"][0]["r2star_per_s"]["value"])
    # Two scans of one object: other noise, the same liver (384 /s, S0/sigma 60, ~600 voxels).
    assert values[0] != values[1]
    assert values[0] == pytest.approx(values[1], rel=0.02)


@pytest.mark.needs_shared_data
@pytest.mark.parametrize(
    ("names", "r2star_per_s", "tolerance"),
    [
        (("dcm_qa_fmap/Si_2_gre_field_magph",), 13.95, 0.1),
        (("dcm_qa_fmap/ref_nifti",), 13.95, 0.1),
        (
            ("dcm_qa_xa30i/9001_gre_field_mapping", "dcm_qa_xa30i/9002_gre_field_mapping"),
            23.30,
            0.1,
        ),
        (("dcm_qa_xa30i/ref_nifti",), 23.30, 0.1),
        (("dcm_qa_table/Ph_1301_Dual-echo_iso",), 76.99, 0.2),
        (("dcm_qa_table/ref_nifti",), 76.99, 0.2),
    ],
)
def test_real_scans_give_the_r2star_of_their_readme(
    shared_data: Path, names: tuple[str, ...], r2star_per_s: float, tolerance: float
) -> None:
    """Medians of the boxes, "decoding alone": log-linear, and the house's fit inside as well."""
    stack = load_stack(find_stacks([shared_data / name for name in names]).usable[0]).stack
    box = next((shared_data / names[0].split("/")[0]).glob("roi_*.nii.gz"))
    mask = rasterise(read_regions(box)[0], stack.grid)
    # At these signals the choice of sigma does not matter; a thousandth of the signal stands in.
    sigma = float(np.median(stack.magnitude[mask])) / 1000.0
    noise = NoiseLevel(sigma=sigma, n_channels=1, method="given", relative_sd=0.0)
    for estimator in ("log-linear", ESTIMATORS[0]):
        fit = fit_r2star(stack, noise, model=estimator)
        median = float(np.median(fit.r2star_per_s[mask]))
        assert median == pytest.approx(r2star_per_s, abs=tolerance), estimator
