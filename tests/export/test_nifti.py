"""Maps come back as they were, where they were, under names that mean what they hold."""

import gzip
import json

import nibabel as nib
import numpy as np
import pytest

from liverfe.export.nifti import nifti_gz_bytes
from liverfe.grid import Grid
from liverfe.maps import VoxelStatus
from liverfe.study import Method, RegionResult

STEM = "sub-0123456789abcdef"
FLOAT_MAPS = {
    "R2starmap": lambda result: result.maps.r2star_per_s,
    "T2starmap": lambda result: 1 / result.maps.r2star_per_s,  # seconds, as BIDS requires
    "S0map": lambda result: result.maps.s0,
    "desc-se_R2starSEmap": lambda result: result.maps.r2star_se_per_s,
    "desc-chi2_misfitmap": lambda result: result.maps.reduced_chi2,
    "desc-lic_LICmap": lambda result: result.lic_mg_per_g,
}


@pytest.fixture
def folder(made, tmp_path):
    """The files of a whole result, on disk."""
    for file in made.files(made.result()):
        path = tmp_path / file.path
        path.parent.mkdir(exist_ok=True)
        path.write_bytes(file.content)
    return tmp_path / "maps"


@pytest.mark.parametrize("ending", FLOAT_MAPS)
def test_map_comes_back_float32_with_its_nan_on_its_grid(made, folder, ending):
    image = nib.load(folder / f"{STEM}_{ending}.nii.gz")
    wanted = FLOAT_MAPS[ending](made.result())
    assert image.get_data_dtype() == np.float32
    values = np.asarray(image.dataobj)
    np.testing.assert_array_equal(np.isnan(values), np.isnan(wanted))
    assert 0 < np.isnan(values).sum() < values.size
    np.testing.assert_allclose(values, wanted, rtol=2e-7)
    affine = made.grid().affine_mm
    np.testing.assert_allclose(image.get_sform(), affine, atol=1e-5)
    np.testing.assert_allclose(image.get_qform(), affine, atol=1e-4)
    assert (int(image.header["sform_code"]), int(image.header["qform_code"])) == (1, 1)
    assert image.header.get_xyzt_units()[0] == "mm"
    assert (float(image.dataobj.slope), float(image.dataobj.inter)) == (1.0, 0.0)


def test_status_map_is_integer_and_its_table_names_every_value(made, folder):
    image = nib.load(folder / f"{STEM}_desc-status_dseg.nii.gz")
    assert image.get_data_dtype() == np.uint8
    np.testing.assert_array_equal(np.asarray(image.dataobj), made.result().maps.status)
    lines = (folder / f"{STEM}_desc-status_dseg.tsv").read_text("utf-8").splitlines()
    assert lines[0].split("\t")[:2] == ["index", "name"]
    assert [int(line.split("\t")[0]) for line in lines[1:]] == [s.value for s in VoxelStatus]


def test_regions_image_holds_each_mask_under_its_number(made, folder):
    labels = np.asarray(nib.load(folder / f"{STEM}_desc-rois_dseg.nii.gz").dataobj)
    assert labels.dtype == np.uint8
    for number, region in enumerate(made.result().regions, start=1):
        np.testing.assert_array_equal(labels == number, region.summary.mask)
    table = (folder / f"{STEM}_desc-rois_dseg.tsv").read_text("utf-8").splitlines()
    assert table[1].split("\t") == ["1", "right lobe", "liver", "812", "108"]  # 6 x 6 x 3 shown


def test_overlapping_regions_keep_the_smaller_one_visible(made):
    small = np.zeros(made.shape, dtype=bool)
    small[3:5, 3:5, 1] = True
    regions = tuple(
        RegionResult(summary=made.summary(name, mask=mask), iron=None)
        for name, mask in (("segment", small), ("liver", made.summary().mask))
    )
    files = {f.path: f.content for f in made.files(made.result(regions=regions, headline="liver"))}
    path = f"maps/{STEM}_desc-rois_dseg"
    labels = nib.Nifti1Image.from_bytes(gzip.decompress(files[f"{path}.nii.gz"])).get_fdata()
    np.testing.assert_array_equal(labels == 1, small)
    rows = [line.split("\t") for line in files[f"{path}.tsv"].decode().splitlines()[1:]]
    assert [row[-1] for row in rows] == ["4", "104"]


def test_a_region_name_cannot_break_the_label_table(made):
    region = RegionResult(summary=made.summary("=cmd|'/c'"), iron=None)
    result = made.result(regions=(region,), headline=None)
    files = {f.path: f.content for f in made.files(result)}
    table = files[f"maps/{STEM}_desc-rois_dseg.tsv"].decode().splitlines()
    assert len(table) == 2
    assert table[1].split("\t")[1] == "'=cmd|'/c'"


def test_only_an_r2star_map_answers_to_the_name_of_one(folder):
    # A program that looks for R2* by the BIDS suffix must not find a LIC or a standard error.
    assert [p.name for p in folder.glob("*_R2starmap.nii.gz")] == [f"{STEM}_R2starmap.nii.gz"]
    for pattern in ("*_T2starmap.nii.gz", "*_S0map.nii.gz", "*_desc-lic_*.nii.gz",
                    "*_desc-status_dseg.nii.gz"):  # fmt: skip
        assert len(list(folder.glob(pattern))) == 1, pattern


def test_sidecars_say_units_and_how_it_was_made(made, folder):
    def sidecar(ending):
        return json.loads((folder / f"{STEM}_{ending}.json").read_text("utf-8"))

    r2star, t2star, lic = map(sidecar, ("R2starmap", "T2starmap", "desc-lic_LICmap"))
    assert (r2star["Units"], t2star["Units"], lic["Units"]) == ("1/s", "s", "mg/g")
    # Echo times of the fixture, 0.9 ms + 0.7 ms each, in seconds.
    np.testing.assert_allclose(r2star["EchoTime"], 0.0009 + 0.0007 * np.arange(12), rtol=1e-6)
    assert r2star["MagneticFieldStrength"] == 1.5
    assert r2star["RepetitionTimeExcitation"] == 0.0125
    assert r2star["SkullStripped"] is False
    assert "Rician maximum likelihood" in r2star["EstimationAlgorithm"]
    assert lic["EstimationReference"] == "Invented example, no paper"
    assert "Not for sole diagnosis" in lic["Caution"]
    assert lic["CalibrationLocal"] is False
    assert t2star["Sources"] == [f"bids::{STEM}/anat/{STEM}_R2starmap.nii.gz"]
    for path in folder.glob("*.nii.gz"):
        assert path.with_name(path.name.replace(".nii.gz", ".json")).exists()


def test_a_sidecar_names_the_papers_of_its_estimator(made):
    for estimator, dois in (("autoregressive", ("mrm.25137", "mrm.27807")), ("log-linear", ())):
        result = made.result(method=Method(estimator=estimator))
        files = {f.path: f.content for f in made.files(result)}
        sidecar = json.loads(files[f"maps/{STEM}_R2starmap.json"])
        # Methods sheet 2.2: the estimator of 2015 and its erratum; the plain line has no paper.
        assert [doi in sidecar.get("EstimationReference", "") for doi in dois] == [True] * len(dois)
        assert ("EstimationReference" in sidecar) == bool(dois)


def test_what_the_files_did_not_say_is_not_in_a_sidecar(made):
    stack = made.stack(acquisition=type(made.stack().acquisition)())
    files = {f.path: f.content for f in made.files(made.result(stack=stack, curve=None,
             lic_mg_per_g=None))}  # fmt: skip
    sidecar = json.loads(files[f"maps/{STEM}_R2starmap.json"])
    assert not {"MagneticFieldStrength", "RepetitionTimeExcitation", "FlipAngle"} & set(sidecar)


def test_without_a_curve_there_is_no_lic_map(made):
    names = [f.path for f in made.files(made.result(curve=None, lic_mg_per_g=None))]
    assert [name for name in names if "lic" in name.lower()] == []


def test_refused_study_has_no_maps(made):
    refused = made.result(outcome="refused", findings=(made.finding("stop"),))
    assert {f.path for f in made.files(refused)} == {"result.json", "regions.csv"}


def test_further_stack_of_a_study_gets_a_run_number(made):
    files = made.files(made.result(), key="0123456789abcdef-2")
    assert f"maps/{STEM}_run-2_R2starmap.nii.gz" in {f.path for f in files}


def test_a_study_key_that_is_a_path_is_refused(made):
    with pytest.raises(ValueError, match="letters and digits"):
        made.files(made.result(), key="../../home")


def test_same_result_gives_the_same_bytes_without_time_or_name(made):
    first, second = ({f.path: f.content for f in made.files(made.result())} for _ in range(2))
    assert first == second
    for path, content in first.items():
        if path.endswith(".gz"):
            # RFC 1952: FLG 0 (no name, no comment) in byte 3, MTIME in bytes 4 to 7.
            assert content[3:8] == bytes(5)


def test_a_sheared_grid_has_no_second_wrong_affine(made):
    affine = np.diag([1.5, 1.5, 6.0, 1.0])
    affine[1, 2] = 2.0  # slices step sideways: a quaternion cannot say that
    grid = Grid(shape=made.shape, affine_mm=affine)
    content = nifti_gz_bytes(np.zeros(made.shape, dtype=np.float32), grid)
    image = nib.Nifti1Image.from_bytes(gzip.decompress(content))
    np.testing.assert_allclose(image.affine, affine, atol=1e-6)
    assert (int(image.header["sform_code"]), int(image.header["qform_code"])) == (1, 0)
