"""The DICOM that is written, read back by pydicom, by dcm2niix and by a validator."""

from __future__ import annotations

import json
import math
import subprocess
from collections import Counter
from collections.abc import Callable
from pathlib import Path

import nibabel as nib
import numpy as np
import pydicom
import pytest

from liverfe.errors import UsageError
from liverfe.phantom import DICOM_LAYOUTS, Phantom, make_phantom, write_dicom
from liverfe.phantom.dicom_header import decimal

TIMES_MS = (1.1, 2.3, 4.0, 7.9)
SLICES = 5

Program = Callable[[str], str]


@pytest.fixture(scope="module")
def written(phantom: Phantom, tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    root = tmp_path_factory.mktemp("dicom")
    for layout in DICOM_LAYOUTS:
        write_dicom(phantom, root / layout, layout=layout)
    write_dicom(phantom, root / "rle", transfer_syntax="rle")
    write_dicom(phantom, root / "implicit-le", transfer_syntax="implicit-le")
    return {folder.name: folder for folder in root.iterdir()}


def read(folder: Path) -> list[pydicom.Dataset]:
    return [pydicom.dcmread(path) for path in sorted(folder.rglob("*.dcm"))]


def lps_of(image: pydicom.Dataset, column: int, row: int) -> np.ndarray:
    """Patient position of a pixel by DICOM PS3.3, equation C.7.6.2.1-1."""
    orientation = np.array(image.ImageOrientationPatient, dtype=float)
    down_mm, across_mm = (float(v) for v in image.PixelSpacing)
    position = np.array(image.ImagePositionPatient, dtype=float)
    return position + orientation[:3] * across_mm * column + orientation[3:] * down_mm * row


@pytest.mark.parametrize("kind", [*DICOM_LAYOUTS, "rle", "implicit-le"])
def test_every_layout_holds_the_stored_counts_at_the_right_echo_and_place(
    written: dict[str, Path], phantom: Phantom, kind: str
) -> None:
    images = [i for i in read(written[kind]) if i.ComplexImageComponent == "MAGNITUDE"]
    seen = Counter()
    for image in images:
        e = TIMES_MS.index(float(image.EchoTime))
        # Where DICOM's own equation puts this image's corner, the grid has slice k's corner.
        ras = lps_of(image, 0, 0) * (-1, -1, 1)
        index = phantom.grid.to_indices(ras)
        np.testing.assert_allclose(index, np.rint(index), atol=1e-5)
        k = round(index[2])
        far = phantom.grid.to_indices(lps_of(image, 79, 63) * (-1, -1, 1))
        np.testing.assert_allclose(far, (79, 63, k), atol=1e-5)
        if int(image.AcquisitionNumber) == 1:
            assert np.array_equal(image.pixel_array.T, phantom.stored[..., k, e])
        assert float(image.RescaleSlope) == 0.5
        seen[e, k] += 1
    runs = 2 if kind == "repeats" else 1
    assert seen == {(e, k): runs for e in range(4) for k in range(SLICES)}


def test_one_series_is_one_series_whose_file_names_tell_no_order(written) -> None:
    images = read(written["one-series"])
    assert len({image.SeriesInstanceUID for image in images}) == 1
    assert sorted(int(image.InstanceNumber) for image in images) == list(range(1, 21))
    times = [float(image.EchoTime) for image in images]
    assert times != sorted(times)
    assert [int(image.InstanceNumber) for image in images] != list(range(1, 21))


def test_series_per_echo_has_one_series_and_folder_an_echo_in_one_study(written) -> None:
    by_series: dict[str, set[float]] = {}
    for image in read(written["series-per-echo"]):
        by_series.setdefault(image.SeriesInstanceUID, set()).add(float(image.EchoTime))
    assert sorted(map(tuple, by_series.values())) == [(time,) for time in TIMES_MS]
    assert len({image.StudyInstanceUID for image in read(written["series-per-echo"])}) == 1
    assert len(list(written["series-per-echo"].iterdir())) == 4


def test_with_phase_mixes_both_components_in_one_series(written, phantom: Phantom) -> None:
    images = read(written["with-phase"])
    assert Counter(image.ImageType[2] for image in images) == {"M": 20, "P": 20}
    assert len({image.SeriesInstanceUID for image in images}) == 1
    assert phantom.phase_rad is not None
    for image in images:
        if image.ComplexImageComponent != "PHASE":
            continue
        k = round(phantom.grid.to_indices(lps_of(image, 0, 0) * (-1, -1, 1))[2])
        e = TIMES_MS.index(float(image.EchoTime))
        stored = image.pixel_array.T * float(image.RescaleSlope) + float(image.RescaleIntercept)
        difference = np.angle(np.exp(1j * (stored - phantom.phase_rad[..., k, e])))
        assert np.abs(difference).max() < 1.01 * math.pi / 4096


def test_repeats_hold_two_runs_of_the_same_object_with_new_noise(written) -> None:
    runs: dict[int, dict[tuple[float, float], np.ndarray]] = {1: {}, 2: {}}
    for image in read(written["repeats"]):
        place = (float(image.EchoTime), float(image.SliceLocation))
        runs[int(image.AcquisitionNumber)][place] = image.pixel_array * 0.5
    assert runs[1].keys() == runs[2].keys()
    first = np.stack([runs[1][place] for place in runs[1]])
    second = np.stack([runs[2][place] for place in runs[1]])
    strong = np.minimum(first, second) > 100
    # Two independent noises of sigma 8: the difference scatters by sqrt(2) x 8.
    assert np.std((first - second)[strong]) == pytest.approx(8 * math.sqrt(2), rel=0.03)


def test_uids_are_valid_and_never_shared_between_images_or_layouts(written) -> None:
    uids: Counter[str] = Counter()
    for folder in written.values():
        for image in read(folder):
            assert image.SOPInstanceUID.is_valid
            assert image.SOPInstanceUID.startswith("2.25.")
            assert int(image.SOPInstanceUID[5:]) < 2**128
            assert image.SOPInstanceUID == image.file_meta.MediaStorageSOPInstanceUID
            uids[image.SOPInstanceUID] += 1
    assert max(uids.values()) == 1
    assert len(uids) == 20 * 4 + 40 * 2


def test_other_pixels_get_other_uids(recipe, phantom: Phantom) -> None:
    other = make_phantom(recipe, np.random.default_rng(recipe.seed + 1))
    assert other.uid("study") != phantom.uid("study")
    assert make_phantom(recipe, np.random.default_rng(recipe.seed)).uid("a") == phantom.uid("a")


def test_every_image_says_that_it_is_synthetic_and_of_nobody(written) -> None:
    for image in read(written["one-series"]):
        assert (str(image.PatientName), image.PatientID) == ("SYNTHETIC^PHANTOM", "SYN-0001")
        assert image.Manufacturer == "liverfe phantom"
        assert "SYNTHETIC" in image.ImageComments
        assert image.QualityControlImage == "YES"
        assert "Laterality" not in image
        for keyword in ("InstitutionName", "OperatorsName", "PerformingPhysicianName"):
            assert keyword not in image


def test_transfer_syntaxes_are_what_they_are_called(written) -> None:
    for name, uid in (
        ("one-series", pydicom.uid.ExplicitVRLittleEndian),
        ("implicit-le", pydicom.uid.ImplicitVRLittleEndian),
        ("rle", pydicom.uid.RLELossless),
    ):
        assert {image.file_meta.TransferSyntaxUID for image in read(written[name])} == {uid}


@pytest.mark.parametrize("kind", ["one-series", "series-per-echo", "with-phase", "rle"])
def test_the_dicom_validator_finds_no_error(
    written: dict[str, Path], program: Program, kind: str
) -> None:
    validator = program("dciodvfy")
    paths = sorted(written[kind].rglob("*.dcm"))[:4]
    for path in paths:
        # It exits with 0 whatever it finds: its words count.
        done = subprocess.run([validator, str(path)], capture_output=True, text=True, check=False)
        words = (done.stdout + done.stderr).splitlines()
        assert "MRImage" in words
        assert not [line for line in words if line.startswith("Error")]


@pytest.mark.parametrize("kind", ["one-series", "series-per-echo", "rle"])
def test_dcm2niix_reads_the_same_values_echo_times_and_places(
    written: dict[str, Path], phantom: Phantom, program: Program, tmp_path: Path, kind: str
) -> None:
    command = [program("dcm2niix"), "-f", "s%s_e%e", "-o", str(tmp_path), str(written[kind])]
    subprocess.run(command, capture_output=True, check=True)
    found = sorted(tmp_path.glob("*.nii"))
    assert len(found) == 4
    times_ms = []
    for path in found:
        sidecar = json.loads(path.with_suffix(".json").read_text())
        times_ms.append(round(1000 * sidecar["EchoTime"], 6))
        assert sidecar["MagneticFieldStrength"] == 1.5
        assert sidecar["ImagingFrequency"] == 63.87
        image = nib.load(path)
        picked = np.random.default_rng(5).integers((0, 0, 0), image.shape, size=(3000, 3))
        place_mm = picked @ image.affine[:3, :3].T + image.affine[:3, 3]
        ours = phantom.grid.to_indices(place_mm)
        # dcm2niix keeps affines as 32-bit floats.
        np.testing.assert_allclose(ours, np.rint(ours), atol=1e-3)
        i, j, k = np.rint(ours).astype(int).T
        expected = phantom.stored[i, j, k, TIMES_MS.index(times_ms[-1])] * 0.5
        values = image.get_fdata()[tuple(picked.T)]
        np.testing.assert_allclose(values, expected, rtol=1e-6)
    assert sorted(times_ms) == list(TIMES_MS)


def test_slopes_that_differ_by_echo_stand_in_each_header_and_give_one_signal(
    vary, tmp_path: Path
) -> None:
    recipe = vary(("slope = 0.5", "slope_per_echo = [0.5, 0.4, 0.25, 0.2]"))
    phantom = make_phantom(recipe, np.random.default_rng(recipe.seed))
    write_dicom(phantom, tmp_path)
    for image in read(tmp_path):
        e = TIMES_MS.index(float(image.EchoTime))
        slope = (0.5, 0.4, 0.25, 0.2)[e]
        assert float(image.RescaleSlope) == slope
        k = round(phantom.grid.to_indices(lps_of(image, 0, 0) * (-1, -1, 1))[2])
        signal = image.pixel_array.T * float(image.RescaleSlope)
        assert np.abs(signal - phantom.magnitude[..., k, e]).max() <= slope / 2 * 1.001


def test_a_slope_of_one_and_an_unknown_field_leave_their_tags_out(vary, tmp_path: Path) -> None:
    recipe = vary(
        ("slope = 0.5", "slope = 1.0"),
        ("field_strength_t = 1.5\n", ""),
        ("imaging_frequency_mhz = 63.87\n", ""),
    )
    write_dicom(make_phantom(recipe, np.random.default_rng(1)), tmp_path)
    for image in read(tmp_path):
        for keyword in ("RescaleSlope", "MagneticFieldStrength", "ImagingFrequency"):
            assert keyword not in image


def test_what_cannot_be_written_is_refused(recipe, tmp_path: Path) -> None:
    plain = make_phantom(recipe, np.random.default_rng(1))
    with pytest.raises(UsageError, match="with-phase: make the phantom with its phase"):
        write_dicom(plain, tmp_path, layout="with-phase")
    with pytest.raises(UsageError, match="--layout enhanced: for DICOM use one of one-series"):
        write_dicom(plain, tmp_path, layout="enhanced")
    with pytest.raises(UsageError, match="transfer syntax jpeg: use one of"):
        write_dicom(plain, tmp_path, transfer_syntax="jpeg")
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize(
    "value", [0.1, -1 / 3, 1e-17 / 3, -123456.789012345678, 2 * math.pi / 4096, 1e22 / 3, -0.0]
)
def test_decimal_strings_fit_sixteen_characters_and_keep_nine_digits(value: float) -> None:
    text = decimal(value)
    assert len(text) <= 16
    assert pydicom.valuerep.DSfloat(text) == pytest.approx(value, rel=1e-9)
    assert text != "-0"
