"""What a change between two visits must exceed: the published test-retest figure.

This is the one figure of the report that is not the study's own. It stands beside the measurement
interval, which is far narrower, so that the number does not look more certain than it is.
"""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["PUBLISHED_REPEATABILITY", "Repeatability"]

_REPEATABILITY_FACTOR = 2.77
"""1.96 times the square root of 2: two single visits differ by less than this many standard
deviations in 95 of 100 pairs without any change (definition of the repeatability coefficient)."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Repeatability:
    """A published test-retest figure.

    Attributes
    ----------
    same_scanner_cov, between_scanners_cov : float
        Coefficient of variation between visits, as a share.
    citation : str
        The paper in a line.
    evidence : str
        How it is known.
    """

    same_scanner_cov: float
    between_scanners_cov: float
    citation: str
    evidence: str

    @property
    def same_scanner_share(self) -> float:
        """Smallest relative change that is one, on the same scanner."""
        return _REPEATABILITY_FACTOR * self.same_scanner_cov

    @property
    def between_scanners_share(self) -> float:
        """Smallest relative change that is one, between scanners."""
        return _REPEATABILITY_FACTOR * self.between_scanners_cov


PUBLISHED_REPEATABILITY = Repeatability(
    same_scanner_cov=0.046,
    between_scanners_cov=0.058,
    citation="Kirk 2010, PubMed 20677256: liver T2*, 1.5 T, 49 patients, 5 centres",
    evidence="abstract",
)
"""Interstudy 4.6 %, intercentre 5.8 % (Kirk 2010; abstract)."""
