"""The two pictures of page 1: the slice with the region's outline, and its R2* map."""

from __future__ import annotations

import matplotlib
import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.patches import PathPatch, Rectangle
from matplotlib.path import Path
from numpy.typing import ArrayLike, NDArray

from liverfe.maps import VoxelStatus
from liverfe.report.canvas import INK, MUTED, draw_svg
from liverfe.report.orientation import SliceView
from liverfe.report.scene import Scene
from liverfe.wording import REPORT

__all__ = ["draw_map", "draw_slice", "scale_of_field", "voxel_edges"]

_WIDTH_IN = 3.35
_MARGIN_IN = 0.2
_FOOT_IN = 0.68
"""Room around the image: letters on all sides, and scale bar, colour bar and legend below it."""

_MOST_HEIGHT_IN = 2.6
"""A slice higher than wide is drawn narrower, so that letters and bars keep their size."""

_COLOURS = "cividis"
"""Perceptually even, in grey and for colour-blind readers alike (Nuñez 2018; secondary)."""

_OVER_STRIPES = ((0.72, 0.08, 0.14), (1.0, 0.90, 0.90))
"""Over-limit voxels are hatched dark red on pale: no colour of the scale, and no grey of it either,
since the two alternate. Neither tone is the white of voxels that are left out."""

_FINE = 6
"""Each voxel becomes this many pixels a side where the map is painted, to hold the hatch."""

_STRIPES_ACROSS = 55
"""Stripes over the width of a map: 1.4 mm each on paper, wide enough for a screen."""

_BRIGHT_PERCENTILE = 99.5
"""Grey levels run from zero to this percentile of the slice: bright fat must not darken liver."""

_TICKS_PER_S = (20, 50, 100, 200, 500, 1000, 2000)

_SCALE_BARS_MM = (100.0, 50.0, 20.0, 10.0, 5.0)


def scale_of_field(field_strength_t: float | None) -> tuple[float, float]:
    """Give the fixed ends of the R2* colour scale.

    Parameters
    ----------
    field_strength_t : float or None
        The settled field, in T.

    Returns
    -------
    tuple of float
        20 and 1000 1/s up to 2 T; 20 and 2000 1/s above, where the same iron gives about twice
        the R2*, and where the field is not known. The scale is logarithmic: LIC spans two
        decades, and on a linear bar all that lies under 2 mg/g would share one tenth of it.
    """
    low_field = field_strength_t is not None and field_strength_t <= 2.0
    return (20.0, 1000.0) if low_field else (20.0, 2000.0)


def draw_slice(scene: Scene) -> str:
    """Draw the grey picture with the region's outline, as SVG."""
    grey = np.nan_to_num(np.asarray(scene.magnitude, dtype=np.float64), nan=0.0)
    top = np.percentile(grey, _BRIGHT_PERCENTILE)
    levels = np.clip(grey / top, 0.0, 1.0) if top > 0 else np.zeros_like(grey)
    pixels = np.repeat(np.rint(levels * 255).astype(np.uint8)[..., None], 3, axis=-1)

    def draw(figure: Figure) -> None:
        axes = _image_axes(figure, scene.view, pixels)
        _outline(axes, scene)
        _scale_bar(figure, scene.view)
        if scene.mask is not None:
            key = _row(figure, 0.02, 0.14)
            key.plot([0.0, 0.07], [0.5, 0.5], color=INK, lw=2.4, solid_capstyle="butt")
            key.plot([0.0, 0.07], [0.5, 0.5], color="white", lw=1.0, solid_capstyle="butt")
            _key_text(key, REPORT["legend_outline"])

    return draw_svg(_size(scene.view), draw)


def draw_map(scene: Scene, *, scale_per_s: tuple[float, float]) -> str:
    """Draw the R2* map of the slice on a fixed scale, as SVG.

    Parameters
    ----------
    scene : Scene
        What to show.
    scale_per_s : tuple of float
        Ends of the colour scale, in 1/s.

    Returns
    -------
    str
        Over-limit voxels hatched, voxels outside or failed transparent.
    """
    pixels = _paint(scene, scale_per_s)

    def draw(figure: Figure) -> None:
        axes = _image_axes(figure, scene.view, pixels)
        axes.add_patch(
            Rectangle(
                (0, 0), 1, 1, transform=axes.transAxes, fill=False, ec=MUTED, lw=0.5, clip_on=False
            )
        )
        _outline(axes, scene)
        _colour_bar(figure, scale_per_s)

    return draw_svg(_size(scene.view), draw)


def _paint(scene: Scene, scale_per_s: tuple[float, float]) -> NDArray[np.uint8]:
    status = np.asarray(scene.status)
    measured = status == VoxelStatus.MEASURED
    values = np.asarray(scene.r2star_per_s, dtype=np.float64)
    places = _share(np.where(measured, values, scale_per_s[0]), scale_per_s)
    colours = matplotlib.colormaps[_COLOURS](places)
    # Under the limit is a true, low R2*: it takes the lowest colour. Failed and outside show paper.
    colours[..., 3] = measured | (status == VoxelStatus.UNDER_LIMIT)
    fine, over = (
        np.repeat(np.repeat(plane, _FINE, axis=0), _FINE, axis=1)
        for plane in (_bytes(colours), status == VoxelStatus.OVER_LIMIT)
    )
    period = max(2 * _FINE, round(fine.shape[1] / _STRIPES_ACROSS))
    row, column = np.nonzero(over)
    fine[over] = _hatch(row + column, period)
    return fine


def _bytes(shares: ArrayLike) -> NDArray[np.uint8]:
    """Turn 0 to 1 into 0 to 255, voxel by voxel: the fine picture has 36 times as many."""
    return np.asarray(np.rint(np.asarray(shares) * 255), dtype=np.uint8)


def _hatch(diagonal: NDArray[np.intp], period: int) -> NDArray[np.uint8]:
    """Give the colours of the hatch at pixels, by row plus column."""
    tones = _bytes([(*tone, 1.0) for tone in _OVER_STRIPES])
    return tones[(diagonal % period >= period // 2).astype(np.intp)]


def _image_size(view: SliceView) -> tuple[float, float]:
    """Width and height of the image in inches: as wide as there is room, but not too high."""
    width = _WIDTH_IN - 2 * _MARGIN_IN
    scale = min(width / view.width_mm, _MOST_HEIGHT_IN / view.height_mm)
    return view.width_mm * scale, view.height_mm * scale


def _size(view: SliceView) -> tuple[float, float]:
    return _WIDTH_IN, _image_size(view)[1] + _MARGIN_IN + _FOOT_IN


def _row(figure: Figure, bottom_in: float, height_in: float) -> Axes:
    """Add axes for one row below the image, as wide as it."""
    width, height = figure.get_size_inches()
    return figure.add_axes(
        (_MARGIN_IN / width, bottom_in / height, 1 - 2 * _MARGIN_IN / width, height_in / height)
    )


def _image_axes(figure: Figure, view: SliceView, pixels: NDArray[np.uint8]) -> Axes:
    width, height = figure.get_size_inches()
    image_width, image_height = _image_size(view)
    axes = figure.add_axes(
        (
            _MARGIN_IN / width,
            _FOOT_IN / height,
            image_width / width,
            image_height / height,
        )
    )
    axes.set_axis_off()
    axes.imshow(
        pixels, extent=(0, view.width_mm, view.height_mm, 0), interpolation="none", aspect="auto"
    )
    beside = 0.5 * _MARGIN_IN / image_width
    above = 0.5 * _MARGIN_IN / image_height
    for letter, x, y in (
        (view.left, -beside, 0.5),
        (view.right, 1 + beside, 0.5),
        (view.top, 0.5, 1 + above),
        (view.bottom, 0.5, -above),
    ):
        axes.text(x, y, letter, transform=axes.transAxes, ha="center", va="center", weight="bold")
    return axes


def _outline(axes: Axes, scene: Scene) -> None:
    """Draw the mask's own voxel edges: what was counted, not a smoothed line near it."""
    if scene.mask is None or not scene.mask.any():
        return
    path = voxel_edges(np.asarray(scene.mask, dtype=bool), scene.view)
    for colour, width in ((INK, 1.9), ("white", 0.8)):
        # Not add_patch: it would look for the extent of each of hundreds of edges.
        axes.add_artist(PathPatch(path, fill=False, ec=colour, lw=width, capstyle="projecting"))


def voxel_edges(mask: NDArray[np.bool_], view: SliceView) -> Path:
    """Trace the edges between voxels inside and outside a mask.

    Parameters
    ----------
    mask : ndarray of bool, shape (rows, columns)
        As it lies on paper.
    view : SliceView
        Gives the size of the slice in mm.

    Returns
    -------
    matplotlib.path.Path
        In mm from the upper left corner, one line an edge.
    """
    rows, columns = mask.shape
    step = np.array([view.width_mm / columns, view.height_mm / rows])
    padded = np.pad(mask, 1)
    row, column = np.nonzero(padded[1:, 1:-1] != padded[:-1, 1:-1])
    level = np.stack([np.stack([column, row], -1), np.stack([column + 1, row], -1)], axis=1)
    row, column = np.nonzero(padded[1:-1, 1:] != padded[1:-1, :-1])
    upright = np.stack([np.stack([column, row], -1), np.stack([column, row + 1], -1)], axis=1)
    corners = np.concatenate([level, upright]).reshape(-1, 2) * step
    return Path(corners, np.tile([Path.MOVETO, Path.LINETO], len(corners) // 2))


def _scale_bar(figure: Figure, view: SliceView) -> None:
    length = next((mm for mm in _SCALE_BARS_MM if mm <= 0.35 * view.width_mm), _SCALE_BARS_MM[-1])
    length_in = length * _image_size(view)[0] / view.width_mm
    bar = _row(figure, 0.26, 0.2)
    bar.set_axis_off()
    bar.plot([0, length_in], [0.5, 0.5], color=INK, lw=2.0, solid_capstyle="butt")
    bar.text(length_in + 0.06, 0.5, f"{length:g} mm", va="center")
    bar.set(xlim=(0, _WIDTH_IN - 2 * _MARGIN_IN), ylim=(0, 1))


def _colour_bar(figure: Figure, scale_per_s: tuple[float, float]) -> None:
    low, high = scale_per_s
    bar = _row(figure, 0.36, 0.1)
    ramp = matplotlib.colormaps[_COLOURS](np.linspace(0.0, 1.0, 256))[None]
    bar.imshow(ramp, aspect="auto", extent=(0.0, 1.0, 0.0, 1.0), interpolation="none")
    ticks = [tick for tick in _TICKS_PER_S if low <= tick <= high]
    # Both ends hold all that lies beyond them, and say so.
    labels = [f"≤{low:g}", *(f"{tick}" for tick in ticks[1:-1]), f"≥{high:g}"]
    bar.set_xticks([float(_share(tick, scale_per_s)) for tick in ticks], labels)
    bar.set_yticks([])
    bar.tick_params(length=2.0, pad=1.5)
    key = _row(figure, 0.02, 0.14)
    key.imshow(
        _hatch(np.add.outer(np.arange(30), np.arange(60)), 15),
        extent=(0.0, 0.07, 0.1, 0.9), aspect="auto", interpolation="none",
    )  # fmt: skip
    _key_text(key, REPORT["legend_over"])


def _key_text(key: Axes, text: str) -> None:
    key.set_axis_off()
    key.text(0.09, 0.5, text, va="center")
    key.set(xlim=(0, 1), ylim=(0, 1))


def _share(r2star_per_s: ArrayLike, scale_per_s: tuple[float, float]) -> NDArray[np.float64]:
    """Place R2* on the logarithmic scale, 0 to 1; what lies beyond an end is put there."""
    low, high = scale_per_s
    inside = np.clip(np.asarray(r2star_per_s, dtype=np.float64), low, high)
    return np.asarray(np.log(inside / low) / np.log(high / low))
