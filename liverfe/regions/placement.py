"""Where a region falls on the images, and whether it can be meant so."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import binary_opening

from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import DecayFit, FitOutcome
from liverfe.outlines import LabelMask, Region, rasterise

Mask = NDArray[np.bool_]

_OUTSIDE_SHARE = 0.5
"""With more than this share outside the body a region is not where it was meant to be."""
_SIDE_SHARE = 0.1
"""A liver region this share of the body's width left of the middle is on the wrong side."""


def place(region: Region, stack: EchoStack, body: Mask) -> tuple[Mask, tuple[Finding, ...]]:
    """Rasterise a region on a stack and check that it can be meant there.

    Parameters
    ----------
    region : Region
        As drawn.
    stack : EchoStack
        The images.
    body : ndarray of bool, shape (X, Y, Z)
        Where the body is (`body_mask`).

    Returns
    -------
    mask : ndarray of bool, shape (X, Y, Z)
        Its voxels.
    findings : tuple of Finding
        ``region-resampled``, ``region-on-left``.

    Raises
    ------
    StudyRefused
        ``region-outside-image``, ``region-not-planar``, ``region-in-hole`` or
        ``region-outside-body``.
    """
    try:
        mask = rasterise(region, stack.grid)
    except ValueError as error:
        raise StudyRefused(Finding.of("region-not-planar", region=region.name)) from error
    if not mask.any():
        source = region.source or "as given"
        raise StudyRefused(Finding.of("region-outside-image", region=region.name, source=source))
    _refuse_hole(region, mask, stack)
    findings = []
    if isinstance(region.shape, LabelMask) and not region.shape.grid.is_same_place_as(stack.grid):
        findings.append(Finding.of("region-resampled", region=region.name))
    if body.any() and mask.any():
        outside = float((mask & ~body).sum() / mask.sum())
        if outside > _OUTSIDE_SHARE and region.organ != "background":
            raise StudyRefused(
                Finding.of("region-outside-body", region=region.name, share=f"{100 * outside:.0f}")
            )
        if region.organ == "liver" and _is_on_left(region, mask, body, stack):
            findings.append(Finding.of("region-on-left", region=region.name))
    return mask, tuple(findings)


def body_mask(fit: DecayFit) -> Mask:
    """Where the body is: tissue with signal, and all that lies between it in a slice.

    Specks of noise are removed, then every gap between tissue along rows and along columns is
    filled: organs without any signal, an iron-loaded liver among them, lie inside.

    Parameters
    ----------
    fit : DecayFit
        Fits of the stack.

    Returns
    -------
    ndarray of bool, shape (X, Y, Z)
        The body; all False where there is no tissue.
    """
    signal = (fit.outcome != FitOutcome.NO_SIGNAL) & (fit.outcome != FitOutcome.NOT_FITTED)
    tissue = binary_opening(signal, structure=np.ones((3, 3, 1), dtype=bool))
    return _between(tissue, axis=0) & _between(tissue, axis=1)


def _between(tissue: Mask, *, axis: int) -> Mask:
    """Voxels with tissue on both sides along an axis, or tissue themselves."""
    before = np.logical_or.accumulate(tissue, axis=axis)
    after = np.flip(np.logical_or.accumulate(np.flip(tissue, axis), axis=axis), axis)
    return np.asarray(before & after)


def _refuse_hole(region: Region, mask: Mask, stack: EchoStack) -> None:
    assert stack.present is not None
    touched = np.flatnonzero(mask.any(axis=(0, 1)) & ~stack.complete_slices)
    if len(touched):
        missing = "; ".join(
            f"slice {k + 1} lacks "
            + ", ".join(f"{te:g} ms" for te in stack.echo_times_ms[~stack.present[:, k]])
            for k in touched[:6]
        )
        raise StudyRefused(Finding.of("region-in-hole", region=region.name, missing=missing))


def _is_on_left(region: Region, mask: Mask, body: Mask, stack: EchoStack) -> bool:
    if "left" in region.name.lower():
        return False
    middle = _centre_mm(body, stack)
    extent = [np.flatnonzero(body.any(axis=axes))[[0, -1]] for axes in ((1, 2), (0, 2), (0, 1))]
    corners = np.stack(np.meshgrid(*extent, indexing="ij"), axis=-1)
    width = float(np.ptp(stack.grid.to_mm(corners)[..., 0]))
    return _centre_mm(mask, stack) < middle - _SIDE_SHARE * width


def _centre_mm(mask: Mask, stack: EchoStack) -> float:
    """Centre of a mask from left to right, in mm."""
    counts = [mask.sum(axis=axes) for axes in ((1, 2), (0, 2), (0, 1))]
    index = [float((np.arange(len(count)) * count).sum() / count.sum()) for count in counts]
    return float(stack.grid.to_mm(index)[0])
