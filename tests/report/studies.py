"""Studies for the report's tests: made by hand, their numbers known without the science."""

from __future__ import annotations

import datetime as dt
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from liverfe.calibration import CalibrationCurve, IronEstimate, band_set, published_curves
from liverfe.echoes import Acquisition, EchoStack, LeftOut, Subject
from liverfe.grid import Grid
from liverfe.maps import DecayMaps, VoxelStatus
from liverfe.noise import NoiseLevel
from liverfe.regions import R2StarSummary, RegionDecay, RegionSummary, ReportableLimits
from liverfe.report import write_report
from liverfe.study import Method, RegionResult, StudyLabel, StudyResult

R2STAR = 312.4
SIGMA = 4.0
S0 = 410.0
TIMES = np.arange(12) * 0.9 + 0.9
SHAPE = (96, 72, 5)
SLICE = 3
"""Where the region has most voxels (index from zero)."""

LABEL = StudyLabel(key="00112233aabbccdd", patient_key="ffeeddcc99887766")
SOFTWARE = {"liverfe": "0.1.0", "python": "3.11.9", "numpy": "2.4.6"}
DOCUMENT = b'{"schema": 1, "outcome": "reported"}\n'


def axial_grid() -> Grid:
    """An axial grid whose X runs to the patient's left and Y to posterior, as scanners store it."""
    affine = np.diag([-4.0, -4.0, 8.0, 1.0])
    affine[:3, 3] = (190.0, 140.0, 40.0)
    return Grid(shape=SHAPE, affine_mm=affine)


def body() -> dict[str, NDArray[np.bool_]]:
    """Ellipses in voxel coordinates of the axial grid: body, liver, spleen, vessels."""
    x, y = np.meshgrid(np.arange(SHAPE[0]), np.arange(SHAPE[1]), indexing="ij")
    inside = ((x - 47.5) / 42) ** 2 + ((y - 36) / 30) ** 2 < 1
    liver = ((x - 32) / 22) ** 2 + ((y - 32) / 18) ** 2 < 1
    spleen = ((x - 76) / 8) ** 2 + ((y - 46) / 10) ** 2 < 1
    vessel = (x - 36) ** 2 + (y - 34) ** 2 < 7
    vessel |= (x - 24) ** 2 + (y - 26) ** 2 < 5
    return {"body": inside, "liver": liver & ~vessel, "spleen": spleen, "vessel": vessel}


def make_stack(**changes: Any) -> EchoStack:
    """Twelve echoes at 1.5 T of a synthetic body, with Rician noise."""
    grid = axial_grid()
    parts = body()
    r2star = np.where(parts["body"], 35.0, 0.0)
    r2star[parts["liver"]] = R2STAR
    r2star[parts["spleen"]] = 80.0
    r2star[parts["vessel"]] = 12.0
    s0 = np.where(parts["body"], S0, 0.0)
    rng = np.random.default_rng(7)
    signal = s0[..., None] * np.exp(-r2star[..., None] * TIMES * 1e-3)
    magnitude = np.repeat(signal[:, :, None, :], SHAPE[2], axis=2)
    real = magnitude + rng.normal(0, SIGMA, magnitude.shape)
    magnitude = np.hypot(real, rng.normal(0, SIGMA, magnitude.shape))
    settings = {
        "magnitude": magnitude,
        "echo_times_ms": TIMES,
        "grid": grid,
        "acquisition": Acquisition(field_strength_t=1.5, scanner="Example Scanner One"),
        "subject": Subject(
            patient_name="Synthetic^Liver Example",
            patient_id="SYN-0001",
            birth_date=dt.date(1990, 5, 6),
            study_date=dt.date(2031, 4, 2),
            sex="F",
            series_description="axial multi-echo",
        ),
        "layout": "one series, all echoes",
        "left_out": (LeftOut(what="phase images of series 3", n_files=60, why="not magnitude"),),
    }
    return EchoStack(**(settings | changes))


def make_maps(stack: EchoStack) -> DecayMaps:
    """R2* as it was put in, a patch of over-limit and one of failed voxels."""
    parts = body()
    r2star = np.full(SHAPE, np.nan, dtype=np.float32)
    rng = np.random.default_rng(3)
    for name, value in (("body", 35.0), ("liver", R2STAR), ("spleen", 80.0), ("vessel", 12.0)):
        where = np.repeat(parts[name][..., None], SHAPE[2], axis=2)
        r2star[where] = value * rng.normal(1, 0.06, where.sum())
    status = np.where(np.isfinite(r2star), VoxelStatus.MEASURED, VoxelStatus.OUTSIDE)
    status[20:26, 40:44, :] = VoxelStatus.OVER_LIMIT
    status[60:63, 20:24, :] = VoxelStatus.FAILED
    r2star[status != VoxelStatus.MEASURED] = np.nan
    blank = np.full(SHAPE, np.nan, dtype=np.float32)
    return DecayMaps(
        grid=stack.grid,
        r2star_per_s=r2star,
        t2star_ms=(1000.0 / r2star).astype(np.float32),
        s0=blank,
        r2star_se_per_s=blank,
        reduced_chi2=blank,
        status=status.astype(np.uint8),
        no_signal=np.zeros(SHAPE, dtype=bool),
    )


def make_summary(
    *,
    name: str = "right lobe",
    organ: str = "liver",
    part: str = "liver",
    **changes: Any,
) -> RegionSummary:
    """A region of two slices, most of it in `SLICE`."""
    parts = body()
    mask = np.zeros(SHAPE, dtype=bool)
    for k in (2, SLICE):
        mask[:, :, k] = parts[part]
    mask[:, :40, 2] = False  # fewer voxels than slice 3
    fine = np.linspace(0.0, TIMES[-1], 60)
    floor = SIGMA * np.sqrt(np.pi / 2)  # mean of a Rayleigh distribution, closed form
    value = {"liver": R2STAR, "spleen": 80.0}[part]
    expected = np.hypot(S0 * np.exp(-value * TIMES * 1e-3), floor)
    settings = {
        "name": name,
        "organ": organ,
        "source": "label image",
        "mask": mask,
        "used": mask,
        "over_limit": np.zeros(SHAPE, dtype=bool),
        "volume_ml": 41.2,
        "n_slices": 2,
        "n_voxels": 812,
        "n_used": 799,
        "n_over_limit": 0,
        "n_under_limit": 0,
        "n_no_signal": 0,
        "n_failed": 2,
        "n_trimmed": 11,
        "r2star": R2StarSummary(
            value=value, statistic="median", low=value - 3.4, high=value + 3.5, iqr=41.0,
            mean=value + 1.7, sd=33.0, qualifier="=", before_trimming=value + 0.6,
            sd_biological=31.0,
        ),
        "limits": ReportableLimits(
            low_r2star_per_s=0.0, high_r2star_per_s=1130.0, s0=S0, sigma=SIGMA
        ),
        "decay": RegionDecay(
            echo_times_ms=TIMES,
            signal=expected,
            signal_low=expected * 0.93,
            signal_high=expected * 1.07,
            curve_times_ms=fine,
            curve=np.hypot(S0 * np.exp(-value * fine * 1e-3), floor),
            noise_floor=floor,
        ),
        "median_reduced_chi2": 1.02,
    }  # fmt: skip
    return RegionSummary(**(settings | changes))


def make_iron(value: float = 7.9718, **changes: Any) -> IronEstimate:
    """2.603e-2 x 312.4 - 0.16 = 7.9718 mg/g (the 1.5 T curve as published)."""
    settings = {
        "curve_key": "hernando2023_1p5",
        "value_mg_per_g": value,
        "value_umol_per_g": value / 55.845 * 1000,
        "low_mg_per_g": value - 0.0885,
        "high_mg_per_g": value + 0.0911,
        "qualifier": "=",
        "limits_mg_per_g": (0.0, 29.254),
        "band_set": "pmc8528353",
        "band": band_set("pmc8528353").band_of(value),
    }
    return IronEstimate(**(settings | changes))


def make_curve() -> CalibrationCurve:
    """The default curve of 1.5 T."""
    return next(curve for curve in published_curves() if curve.key == "hernando2023_1p5")


def make_result(**changes: Any) -> StudyResult:
    """A clean study at 1.5 T with one liver region and the spleen."""
    stack = changes.pop("stack", None) or make_stack()
    others = tuple(
        make_iron(value, curve_key=key)
        for key, value in (("wood2005", 8.137), ("garbowski2014", 9.8), ("hankins2009", 8.293))
    )
    liver = RegionResult(summary=make_summary(), iron=make_iron(), other_curves=others)
    spleen = RegionResult(
        summary=make_summary(name="spleen", organ="spleen", part="spleen"), iron=None
    )
    settings = {
        "outcome": "reported",
        "findings": (),
        "method": Method(),
        "stack": stack,
        "noise": NoiseLevel(sigma=SIGMA, n_channels=1, method="air", relative_sd=0.004),
        "maps": make_maps(stack),
        "curve": make_curve(),
        "regions": (liver, spleen),
        "headline": "right lobe",
    }
    return StudyResult(**(settings | changes))


def censored_result() -> StudyResult:
    """The same study with its liver region beyond the limit of 1130 1/s."""
    result = make_result()
    liver = result.regions[0]
    summary = replace(
        liver.summary,
        r2star=replace(
            liver.summary.r2star,
            value=1130.0, low=1130.0, high=None, iqr=None, mean=None, sd=None, qualifier=">",
        ),
        n_over_limit=640,
        n_used=159,
    )  # fmt: skip
    iron = make_iron(29.2539, low_mg_per_g=29.2539, high_mg_per_g=None, qualifier=">")
    return replace(
        result, regions=(replace(liver, summary=summary, iron=iron), *result.regions[1:])
    )


def report_of(result: StudyResult, **options: Any) -> bytes:
    """Write the report with the label, software and document of these tests."""
    settings = {"label": LABEL, "document": DOCUMENT, "software": SOFTWARE, "n_input_files": 60}
    return write_report(result, **(settings | options))
