"""Results made by hand, with a patient planted in them who must never come out."""

from __future__ import annotations

import dataclasses
from collections.abc import Callable
from datetime import date
from typing import Any

import numpy as np
import pytest

from liverfe.calibration import Band, CalibrationCurve, IronEstimate
from liverfe.echoes import Acquisition, EchoStack, LeftOut, Subject
from liverfe.errors import Finding
from liverfe.export import map_files, regions_csv, result_document, to_json_bytes
from liverfe.export.output_file import OutputFile
from liverfe.grid import Grid
from liverfe.maps import DecayMaps, VoxelStatus
from liverfe.noise import NoiseCandidate, NoiseLevel
from liverfe.regions import R2StarSummary, RegionDecay, RegionSummary, ReportableLimits
from liverfe.study import Method, RegionResult, StudyLabel, StudyResult

SHAPE = (12, 10, 4)
SOFTWARE = {"liverfe": "0.1.0", "python": "3.11.9", "numpy": "2.4.6"}
LABEL = StudyLabel(key="0123456789abcdef", patient_key="fedcba9876543210")

PATIENT = Subject(
    patient_name="Quixley^Zelda",
    patient_id="SYN-77123",
    birth_date=date(1961, 7, 23),
    study_date=date(2031, 4, 2),
    sex="F",
    study_uid="1.2.826.0.1.3680043.10.9999.7",
    series_description="ME GRE Quixley",
)
"""Invented; synthetic."""


def make_grid() -> Grid:
    """An oblique grid, 1.5 x 1.25 x 8 mm, tilted by 20 degrees about x."""
    c, s = np.cos(np.deg2rad(20)), np.sin(np.deg2rad(20))
    rotation = np.array([[1, 0, 0], [0, c, -s], [0, s, c]])
    affine = np.eye(4)
    affine[:3, :3] = rotation @ np.diag([-1.5, -1.25, 8.0])
    affine[:3, 3] = (90.0, 70.5, -12.25)
    return Grid(shape=SHAPE, affine_mm=affine, slice_thickness_mm=8.0)


def make_stack(**changes: Any) -> EchoStack:
    """Twelve echoes, all there."""
    given: dict[str, Any] = {
        "magnitude": np.full((*SHAPE, 12), 100.0, dtype=np.float32),
        "echo_times_ms": 0.9 + 0.7 * np.arange(12),
        "grid": make_grid(),
        "acquisition": Acquisition(
            field_strength_t=1.5,
            imaging_frequency_mhz=63.87,
            scanner="Invented Works Model One",
            sequence="me3d1",
            repetition_time_ms=12.5,
            flip_angle_deg=5.0,
        ),
        "subject": PATIENT,
        "layout": "classic DICOM, one series",
        "left_out": (LeftOut(what="phase images of series 3", n_files=48, why="not magnitude"),),
    }
    return EchoStack(**(given | changes))


def make_maps() -> DecayMaps:
    """R2* that rises with x; one voxel over the limit, one failed, the last slice air."""
    r2star = np.broadcast_to(
        np.linspace(40, 1100, SHAPE[0], dtype=np.float32)[:, None, None], SHAPE
    ).copy()
    status = np.full(SHAPE, VoxelStatus.MEASURED, dtype=np.uint8)
    status[..., -1] = VoxelStatus.OUTSIDE
    status[3, 3, 1] = VoxelStatus.OVER_LIMIT
    status[4, 4, 1] = VoxelStatus.FAILED
    status[5, 5, 1] = VoxelStatus.UNDER_LIMIT
    r2star[status != VoxelStatus.MEASURED] = np.nan
    return DecayMaps(
        grid=make_grid(),
        r2star_per_s=r2star,
        t2star_ms=(1000 / r2star).astype(np.float32),
        s0=np.where(np.isnan(r2star), np.nan, 410).astype(np.float32),
        r2star_se_per_s=(0.03 * r2star).astype(np.float32),
        reduced_chi2=np.where(np.isnan(r2star), np.nan, 1.01).astype(np.float32),
        status=status,
        no_signal=status == VoxelStatus.OUTSIDE,
    )


def make_summary(name: str = "right lobe", **changes: Any) -> RegionSummary:
    """The region of the contract's example."""
    mask = np.zeros(SHAPE, dtype=bool)
    mask[2:8, 2:8, 0:3] = True
    times = 0.9 + 0.7 * np.arange(12)
    given: dict[str, Any] = {
        "name": name,
        "organ": "liver",
        "source": "label image",
        "mask": mask,
        "used": mask,
        "over_limit": np.zeros(SHAPE, dtype=bool),
        "volume_ml": 41.2,
        "n_slices": 3,
        "n_voxels": np.int64(812),  # counts come from NumPy
        "n_used": 799,
        "n_over_limit": 0,
        "n_under_limit": 0,
        "n_no_signal": 0,
        "n_failed": 2,
        "n_trimmed": 11,
        "r2star": R2StarSummary(
            value=312.4, statistic="median", low=309.0, high=315.9, iqr=41.0, mean=314.1,
            sd=33.0, qualifier="=", before_trimming=313.0, sd_biological=31.0,
        ),
        "limits": ReportableLimits(
            low_r2star_per_s=0.0, high_r2star_per_s=1130.0, s0=410.0, sigma=4.1
        ),
        "decay": RegionDecay(
            echo_times_ms=times,
            signal=410 * np.exp(-0.3124 * times),
            signal_low=400 * np.exp(-0.3124 * times),
            signal_high=420 * np.exp(-0.3124 * times),
            curve_times_ms=times,
            curve=410 * np.exp(-0.3124 * times),
            noise_floor=5.14,
        ),
        "median_reduced_chi2": 1.02,
    }  # fmt: skip
    return RegionSummary(**(given | changes))


def make_iron(**changes: Any) -> IronEstimate:
    """The LIC of the contract's example."""
    given: dict[str, Any] = {
        "curve_key": "example_1p5",
        "value_mg_per_g": 7.97,
        "value_umol_per_g": 142.7,
        "low_mg_per_g": 7.88,
        "high_mg_per_g": 8.06,
        "qualifier": "=",
        "limits_mg_per_g": (0.0, 29.3),
        "band_set": "pmc8528353",
        "band": Band(name="moderate", low_mg_per_g=7.0, high_mg_per_g=15.0),
    }
    return IronEstimate(**(given | changes))


def make_curve(**changes: Any) -> CalibrationCurve:
    """A curve of no paper, for tests."""
    given: dict[str, Any] = {
        "key": "example_1p5",
        "reference_key": "example",
        "citation": "Invented example, no paper",
        "field_strength_t": 1.5,
        "form": "linear",
        "equation": "LIC = 0.0256 R2* - 0.03",
        "coefficients": (0.0256, -0.03),
        "published_unit": "mg/g",
        "evidence": "abstract",
        "fit_model_of_origin": "mono-exponential",
        "cohort": "nobody",
        "valid_r2star_per_s": None,
    }
    return CalibrationCurve(**(given | changes))


def make_finding(level: str = "caution", text: str = "A doubt.", remedy: str = "Look.") -> Finding:
    """A finding of any level; its code is one that exists."""
    return Finding(code="field-conflict", level=level, text=text, remedy=remedy)  # type: ignore[arg-type]


def make_result(**changes: Any) -> StudyResult:
    """A reported study with one liver region and a spleen."""
    lic = (0.0256 * make_maps().r2star_per_s - 0.03).astype(np.float32)
    spleen = np.zeros(SHAPE, dtype=bool)
    spleen[9:11, 1:4, 0:2] = True
    given: dict[str, Any] = {
        "outcome": "reported",
        "findings": (),
        "method": Method(),
        "stack": make_stack(),
        "noise": NoiseLevel(
            sigma=4.1,
            n_channels=1,
            method="air",
            relative_sd=0.004,
            candidates=(
                NoiseCandidate(
                    method="air", sigma=4.1, n_channels=1, relative_sd=0.004, n_voxels=9000,
                    remark="taken",
                ),
                NoiseCandidate(
                    method="residual", sigma=None, n_channels=1, relative_sd=None, n_voxels=0,
                    remark="closed",
                ),
            ),
        ),
        "maps": make_maps(),
        "lic_mg_per_g": lic,
        "curve": make_curve(),
        "regions": (
            RegionResult(
                summary=make_summary(),
                iron=make_iron(),
                other_curves=(make_iron(curve_key="second_1p5", value_mg_per_g=8.4),),
            ),
            RegionResult(
                summary=make_summary("spleen", organ="spleen", mask=spleen, used=spleen),
                iron=None,
            ),
        ),
        "headline": "right lobe",
    }  # fmt: skip
    return StudyResult(**(given | changes))


def make_document(result: StudyResult, key: str = LABEL.key) -> dict[str, Any]:
    """The document of a result, with the label and software of these tests."""
    label = dataclasses.replace(LABEL, key=key)
    return result_document(result, label=label, software=SOFTWARE)


def make_files(result: StudyResult, key: str = LABEL.key) -> tuple[OutputFile, ...]:
    """All files of a result that this room makes."""
    document = make_document(result, key)
    return (
        OutputFile(path="result.json", content=to_json_bytes(document)),
        OutputFile(path="regions.csv", content=regions_csv(document)),
        *map_files(result, document),
    )


@pytest.fixture(scope="session")
def made() -> Callable[[], None]:
    """This file's makers by name: ``made.result(headline=None)``, ``made.summary(...)``, ..."""

    class Made:
        grid, stack, summary = map(staticmethod, (make_grid, make_stack, make_summary))
        iron, curve, finding = map(staticmethod, (make_iron, make_curve, make_finding))
        result, document, files = map(staticmethod, (make_result, make_document, make_files))
        shape, software, label = SHAPE, SOFTWARE, LABEL

    return Made  # type: ignore[return-value]
