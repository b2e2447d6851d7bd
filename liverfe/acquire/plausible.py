"""What the numbers of a stack say of themselves: saturation, sign, order of the echoes.

These checks need pixels but no fit: they find images that are no magnitude decay at all.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from liverfe.errors import Finding

_BRIGHT = 0.3
"""Voxels above this share of the maximum count as bright tissue."""

_SATURATED_SHARE = 0.01
"""From this share of the bright voxels on, the plateau is no accident of a few voxels."""

_FEW = 20
"""Fewer voxels at the maximum than this say nothing."""

_JUST_BELOW = 0.95
"""Values from this share of the maximum on are just below the plateau."""

_NEGATIVE_SHARE = 0.01
"""Resampling leaves single negative values in magnitude; phase is negative in half of them."""

FULL_SCALES = (255, 1023, 4095, 16383, 32767, 65535)
"""Where stored values end by their bits, for files that do not declare any."""


@dataclass(frozen=True, slots=True)
class Brightest:
    """The top of the stored values of one image or volume.

    Attributes
    ----------
    highest : float
        The greatest stored value.
    n_highest, n_just_below, n_bright : int
        Voxels at it, in the 5 % below it, and above 30 % of it.
    """

    highest: float
    n_highest: int
    n_just_below: int
    n_bright: int


def brightest(stored: NDArray[Any], top: float | None = None) -> Brightest:
    """Count the voxels at and just below the top of the stored values.

    Parameters
    ----------
    stored : ndarray
        Stored values of one image or volume.
    top : float, optional
        Count against this value, for images that belong together; default the image's maximum.
    """
    highest = float(stored.max()) if top is None else top
    n_highest = int(np.count_nonzero(stored >= highest))
    return Brightest(
        highest=highest,
        n_highest=n_highest,
        n_just_below=int(np.count_nonzero(stored >= _JUST_BELOW * highest)) - n_highest,
        n_bright=int(np.count_nonzero(stored > _BRIGHT * highest)),
    )


def check_saturation(
    first: Brightest, second: Brightest, *, full_scale: float | None, where: str
) -> Iterator[Finding]:
    """Check whether the first echo is cut off at a greatest value.

    A plateau shows as equal maxima: many voxels of the first echo at its greatest value, and the
    second echo ending at the same value; or, at the end of the number range, many more voxels at
    the greatest value than just below it.

    Parameters
    ----------
    first, second : Brightest
        Of the first two echoes.
    full_scale : float or None
        Where the number range ends; None where it is not known.
    where : str
        For the message.

    Yields
    ------
    Finding
        ``image-saturated`` (stop) or ``some-voxels-saturated`` (caution).
    """
    if first.highest <= 0 or first.n_highest < _FEW:
        return
    is_at_end = full_scale is not None and first.highest >= full_scale
    share = first.n_highest / max(1, first.n_bright)
    ends_alike = second.highest == first.highest and second.n_highest >= _FEW
    is_cut = is_at_end and 0 < first.n_just_below < first.n_highest
    facts = {
        "where": where,
        "value": f"{first.highest:g}",
        "n": first.n_highest,
        "percent": f"{100 * share:.1f}",
    }
    if share >= _SATURATED_SHARE and (ends_alike or is_cut):
        yield Finding.of("image-saturated", **facts)
    elif is_at_end and (ends_alike or is_cut):
        yield Finding.of("some-voxels-saturated", **facts)


def check_sign(n_negative: int, n_nonzero: int, *, where: str) -> Iterator[Finding]:
    """Check that the values are those of a magnitude: not negative.

    Yields
    ------
    Finding
        ``signed-values`` (stop) or ``few-negative-values`` (note).
    """
    if not n_negative:
        return
    share = n_negative / max(1, n_nonzero)
    facts = {"where": where, "percent": f"{100 * share:.2g}"}
    code = "signed-values" if share > _NEGATIVE_SHARE else "few-negative-values"
    yield Finding.of(code, **facts)


def check_order(mean_signals: Sequence[float], *, where: str) -> Iterator[Finding]:
    """Check that the signal does not rise from echo to echo.

    Water and fat may make some echoes brighter than the one before, but not all of them.

    Yields
    ------
    Finding
        ``image-signal-rises`` (stop).
    """
    if len(mean_signals) >= 3 and bool((np.diff(mean_signals) > 0).all()):
        yield Finding.of("image-signal-rises", where=where, n_echoes=len(mean_signals))
