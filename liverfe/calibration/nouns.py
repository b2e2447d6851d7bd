"""`Band`, `BandSet` and `IronEstimate`."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import Literal

from liverfe.errors import Finding

Evidence = Literal["abstract", "secondary", "memory", "local"]
Form = Literal["linear", "power"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Band:
    """One named range of LIC, in mg/g dry weight.

    Attributes
    ----------
    name : str
        As the source words it.
    low_mg_per_g, high_mg_per_g : float or None
        Its thresholds; None at an open end.
    low_closed, high_closed : bool
        Whether a LIC exactly at that threshold belongs to this band.
    """

    name: str
    low_mg_per_g: float | None
    high_mg_per_g: float | None
    low_closed: bool = True
    high_closed: bool = False

    def holds(self, lic_mg_per_g: float) -> bool:
        """Tell whether a LIC lies in this band.

        Parameters
        ----------
        lic_mg_per_g : float
            LIC in mg/g dry weight.

        Returns
        -------
        bool
            Thresholds count as `low_closed` and `high_closed` say.
        """
        above = self.low_mg_per_g is None or (
            lic_mg_per_g >= self.low_mg_per_g
            if self.low_closed
            else lic_mg_per_g > self.low_mg_per_g
        )
        below = self.high_mg_per_g is None or (
            lic_mg_per_g <= self.high_mg_per_g
            if self.high_closed
            else lic_mg_per_g < self.high_mg_per_g
        )
        return above and below


@dataclass(frozen=True, slots=True, kw_only=True)
class BandSet:
    """The bands of one source: each LIC lies in exactly one of them.

    Attributes
    ----------
    key : str
        Its name in commands and results, for example ``pmc8528353``.
    reference_key : str
        Its paper in `liverfe.sources`.
    citation : str
        The paper in one line.
    where : str
        Where in the paper.
    evidence : {'abstract', 'secondary', 'memory'}
        How the thresholds are known.
    bands : tuple of Band
        Lowest first, without gap or overlap.
    threshold_note : str
        How far the source settles which band a threshold belongs to.
    """

    key: str
    reference_key: str
    citation: str
    where: str
    evidence: Evidence
    bands: tuple[Band, ...]
    threshold_note: str

    def __post_init__(self) -> None:
        if self.bands[0].low_mg_per_g is not None or self.bands[-1].high_mg_per_g is not None:
            raise ValueError(f"band set {self.key!r}: the outer bands must be open")
        for lower, upper in pairwise(self.bands):
            if lower.high_mg_per_g is None or lower.high_mg_per_g != upper.low_mg_per_g:
                raise ValueError(f"band set {self.key!r}: gap or overlap after band {lower.name!r}")
            if lower.high_closed == upper.low_closed:
                raise ValueError(
                    f"band set {self.key!r}: {lower.high_mg_per_g:g} must belong to one band"
                )
        thresholds = self.thresholds_mg_per_g
        if any(low >= high for low, high in pairwise(thresholds)):
            raise ValueError(f"band set {self.key!r}: thresholds must ascend")

    @property
    def thresholds_mg_per_g(self) -> tuple[float, ...]:
        """The thresholds, mg/g dry weight, ascending."""
        return tuple(b.high_mg_per_g for b in self.bands if b.high_mg_per_g is not None)

    def band_of(self, lic_mg_per_g: float, qualifier: Literal["=", ">", "<"] = "=") -> Band | None:
        """Give the band of a LIC.

        Parameters
        ----------
        lic_mg_per_g : float
            LIC in mg/g dry weight; where censored, the limit.
        qualifier : {'=', '>', '<'}
            Whether the LIC is the value, or a limit that the value lies beyond.

        Returns
        -------
        Band or None
            None where a censored value could lie in more than one band.
        """
        if qualifier == "=":
            return next(band for band in self.bands if band.holds(lic_mg_per_g))
        # The value lies strictly beyond the limit, so whether a threshold is closed plays no part.
        if qualifier == ">":
            possible = [
                b for b in self.bands if b.high_mg_per_g is None or b.high_mg_per_g > lic_mg_per_g
            ]
        else:
            possible = [
                b for b in self.bands if b.low_mg_per_g is None or b.low_mg_per_g < lic_mg_per_g
            ]
        return possible[0] if len(possible) == 1 else None


@dataclass(frozen=True, slots=True, kw_only=True)
class IronEstimate:
    """Liver iron concentration of a region, dry weight.

    Attributes
    ----------
    curve_key : str
        Key of the calibration curve.
    value_mg_per_g, value_umol_per_g : float
        LIC; where censored, the limit.
    low_mg_per_g, high_mg_per_g : float or None
        The measurement interval carried through the curve: it does not cover the calibration.
    qualifier : {'=', '>', '<'}
        Whether the value is measured, or the limit it lies beyond.
    limits_mg_per_g : tuple of float
        The region's reportable limits carried through the curve.
    band_set : str
        Key of the band set.
    band : Band or None
        The band of the value; None where a censored value could lie in more than one.
    findings : tuple of Finding
        Doubts about the conversion.
    """

    curve_key: str
    value_mg_per_g: float
    value_umol_per_g: float
    low_mg_per_g: float | None
    high_mg_per_g: float | None
    qualifier: Literal["=", ">", "<"]
    limits_mg_per_g: tuple[float, float]
    band_set: str
    band: Band | None
    findings: tuple[Finding, ...] = ()
