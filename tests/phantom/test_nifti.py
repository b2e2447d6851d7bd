"""The NIfTI that is written, read back by nibabel and by the BIDS validator."""

from __future__ import annotations

import gzip
import json
import subprocess
from collections.abc import Callable
from pathlib import Path

import nibabel as nib
import numpy as np
import pytest

from liverfe.errors import UsageError
from liverfe.phantom import Phantom, make_phantom, write_bids, write_nifti

TIMES_MS = (1.1, 2.3, 4.0, 7.9)
SLOPES = "slope_per_echo = [0.5, 0.4, 0.25, 0.2]"


def sidecar(path: Path) -> dict:
    return json.loads(path.with_name(path.name.replace(".nii.gz", ".json")).read_text())


def test_the_4d_file_holds_counts_slope_place_and_echo_times(
    phantom: Phantom, tmp_path: Path
) -> None:
    (path,) = write_nifti(phantom, tmp_path, layout="4d")
    image = nib.load(path)
    assert image.shape == (80, 64, 5, 4)
    assert image.get_data_dtype() == np.int16
    assert np.array_equal(np.asarray(image.dataobj.get_unscaled()), phantom.stored)
    np.testing.assert_allclose(image.get_fdata(), phantom.stored * 0.5)
    for affine, code in (image.get_sform(coded=True), image.get_qform(coded=True)):
        np.testing.assert_allclose(affine, phantom.grid.affine_mm, atol=2e-4)
        assert code == 1
    assert sidecar(path)["EchoTime"] == [0.0011, 0.0023, 0.004, 0.0079]  # BIDS: seconds
    assert sidecar(path)["MagneticFieldStrength"] == 1.5
    assert sidecar(path)["Synthetic"] is True
    assert b"SYNTHETIC" in image.header["descrip"].tobytes()


@pytest.mark.parametrize("layout", ["file-per-echo", "bids"])
def test_a_file_an_echo_holds_its_own_echo(phantom: Phantom, tmp_path: Path, layout: str) -> None:
    paths = write_nifti(phantom, tmp_path, layout=layout)
    assert len(paths) == 4
    for e, path in enumerate(paths):
        assert sidecar(path)["EchoTime"] == pytest.approx(TIMES_MS[e] / 1000, abs=1e-12)
        np.testing.assert_allclose(nib.load(path).get_fdata(), phantom.stored[..., e] * 0.5)


def test_slopes_that_differ_by_echo_give_the_same_signal_in_every_layout(
    vary, tmp_path: Path
) -> None:
    recipe = vary(("slope = 0.5", SLOPES))
    phantom = make_phantom(recipe, np.random.default_rng(recipe.seed))
    (whole,) = write_nifti(phantom, tmp_path / "a", layout="4d")
    parts = write_nifti(phantom, tmp_path / "b", layout="file-per-echo")
    signal = nib.load(whole).get_fdata()
    for e, (path, slope) in enumerate(zip(parts, (0.5, 0.4, 0.25, 0.2), strict=True)):
        image = nib.load(path)
        assert image.dataobj.slope == pytest.approx(slope)
        np.testing.assert_allclose(image.get_fdata(), signal[..., e], rtol=1e-6)
        assert np.abs(signal[..., e] - phantom.magnitude[..., e]).max() <= slope / 2 * 1.001


def test_the_bids_validator_accepts_the_data_set(
    phantom: Phantom, tmp_path: Path, program: Callable[[str], str]
) -> None:
    write_bids(phantom, tmp_path)
    command = [program("bids-validator-deno"), "--ignoreWarnings", str(tmp_path)]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout
    assert "BIDS compatible" in done.stdout


def test_the_gzip_header_holds_no_name_and_no_time(phantom: Phantom, tmp_path: Path) -> None:
    # RFC 1952: bytes 4 to 7 are the time, bit 3 of byte 3 says that a name follows.
    (path,) = write_nifti(phantom, tmp_path)
    head = path.read_bytes()[:8]
    assert head[4:8] == b"\0\0\0\0"
    assert not head[3] & 0b1000
    assert len(gzip.decompress(path.read_bytes())) == 352 + 80 * 64 * 5 * 4 * 2


def test_an_unknown_field_leaves_its_keys_out(vary, tmp_path: Path) -> None:
    recipe = vary(("field_strength_t = 1.5\n", ""))
    phantom = make_phantom(recipe, np.random.default_rng(1))
    (path,) = write_nifti(phantom, tmp_path)
    assert "MagneticFieldStrength" not in sidecar(path)
    assert sidecar(path)["ImagingFrequency"] == 63.87


def test_an_unknown_layout_is_refused(phantom: Phantom, tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="--layout 5d: for NIfTI use one of 4d, file-per-echo"):
        write_nifti(phantom, tmp_path, layout="5d")
