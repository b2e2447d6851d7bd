"""Which slice and which echo page 1 shows, turned as they lie on paper."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.maps import DecayMaps, VoxelStatus
from liverfe.regions import RegionSummary
from liverfe.report.orientation import SliceView
from liverfe.units import t2star_ms_from_r2star_per_s

__all__ = ["Scene", "choose_scene"]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Scene:
    """What the two pictures show.

    Attributes
    ----------
    view : SliceView
        How the slice is turned.
    k : int
        Index of the slice, from zero.
    e : int
        Index of the echo of the grey picture, from zero.
    magnitude : ndarray of float32, shape (rows, columns)
        Signal of that slice and echo, as it lies on paper.
    r2star_per_s, status : ndarray, shape (rows, columns)
        Map and voxel status of the slice.
    mask : ndarray of bool, shape (rows, columns), or None
        The region's voxels before trimming; None without a region.
    """

    view: SliceView
    k: int
    e: int
    magnitude: NDArray[np.generic]
    r2star_per_s: NDArray[np.generic]
    status: NDArray[np.generic]
    mask: NDArray[np.generic] | None


def choose_scene(stack: EchoStack, maps: DecayMaps, region: RegionSummary | None) -> Scene:
    """Choose slice and echo to show.

    Parameters
    ----------
    stack : EchoStack
        The images.
    maps : DecayMaps
        Their maps.
    region : RegionSummary or None
        The region that page 1 is about.

    Returns
    -------
    Scene
        The slice with most of the region's voxels (without a region: most measured voxels), at
        the echo nearest to half the region's T2*: there liver has darkened and vessels have not,
        and a reader can tell one from the other. Without a measured region: the first echo.
    """
    of_interest = maps.status == VoxelStatus.MEASURED if region is None else region.mask
    k = int(np.argmax(of_interest.sum(axis=(0, 1))))
    e = 0
    if region is not None and region.r2star.qualifier == "=" and region.r2star.value > 0:
        wanted_ms = 0.5 * t2star_ms_from_r2star_per_s(region.r2star.value)
        e = int(np.argmin(np.abs(stack.echo_times_ms - wanted_ms)))
    status = maps.status[:, :, k]
    if region is not None:
        # A voxel of the region that has no signal is over the limit, whatever the map calls it.
        status = np.where(region.over_limit[:, :, k], VoxelStatus.OVER_LIMIT, status)
    view = SliceView.of(stack.grid)
    return Scene(
        view=view,
        k=k,
        e=e,
        magnitude=view.on_paper(stack.magnitude[:, :, k, e]),
        r2star_per_s=view.on_paper(maps.r2star_per_s[:, :, k]),
        status=view.on_paper(status),
        mask=None if region is None else view.on_paper(region.mask[:, :, k]),
    )
