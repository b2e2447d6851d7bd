"""`StudyResult`: all that report, exports and page show; they compute nothing themselves."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from liverfe.calibration import CalibrationCurve, IronEstimate
from liverfe.echoes import EchoStack
from liverfe.errors import Finding
from liverfe.maps import DecayMaps
from liverfe.noise import NoiseLevel
from liverfe.regions import RegionSummary
from liverfe.study.method import Method


@dataclass(frozen=True, slots=True, kw_only=True)
class StudyLabel:
    """The names that a study goes by outside: keys, never a person's.

    Attributes
    ----------
    key : str
        Study key: 16 hex digits, with ``-2``, ``-3`` for further stacks.
    patient_key : str
        Patient key: 16 hex digits; empty where the files name no patient.
    """

    key: str
    patient_key: str


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class RegionResult:
    """One region with its R2* and, for liver, its LIC.

    Attributes
    ----------
    summary : RegionSummary
        Its statistics.
    iron : IronEstimate or None
        Its LIC; None for other organs and where none may be stated.
    other_curves : tuple of IronEstimate
        The same by each other curve of the field, for the appendix.
    """

    summary: RegionSummary
    iron: IronEstimate | None
    other_curves: tuple[IronEstimate, ...] = ()


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class StudyResult:
    """The outcome of a study.

    Attributes
    ----------
    outcome : {'reported', 'refused'}
        Whether numbers may be shown at all.
    findings : tuple of Finding
        All doubts, gravest first.
    method : Method
        How it was done.
    stack : EchoStack or None
        What was measured; None where the files gave no stack.
    noise : NoiseLevel or None
        Its noise; None if refused.
    maps : DecayMaps or None
        Its maps; None if refused.
    lic_mg_per_g : ndarray of float32, shape (X, Y, Z), or None
        LIC map of measured voxels, for display; None without a curve.
    curve : CalibrationCurve or None
        The curve that applies; None where none may be used.
    regions : tuple of RegionResult
        One for each region, and the pooled liver regions where those are the headline.
    headline : str or None
        Name of the region that page 1 shows.
    """

    outcome: Literal["reported", "refused"]
    findings: tuple[Finding, ...]
    method: Method
    stack: EchoStack | None = None
    noise: NoiseLevel | None = None
    maps: DecayMaps | None = None
    lic_mg_per_g: NDArray[np.float32] | None = None
    curve: CalibrationCurve | None = None
    regions: tuple[RegionResult, ...] = ()
    headline: str | None = None

    @property
    def headline_region(self) -> RegionResult | None:
        """The region that page 1 shows, or None where there is none."""
        return next((r for r in self.regions if r.summary.name == self.headline), None)

    @property
    def has_caution(self) -> bool:
        """Whether a reader must see a doubt."""
        return any(finding.level == "caution" for finding in self.findings)
