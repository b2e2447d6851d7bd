"""The synthetic abdomen: which structure each voxel belongs to.

Shapes are our own, set by eye on plain textbook anatomy of an upper abdomen; they are nobody's.
They stand in RAS+ millimetres of a reference body and are stretched to the recipe's size: +x is
the patient's right, where the liver lies (image left in an axial slice as radiologists hang it).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.grid import Grid
from liverfe.phantom.recipe import AnatomyPlan
from liverfe.phantom.solids import Coordinates, Ellipsoid, Tube, coordinates_mm

__all__ = ["STRUCTURES", "TISSUES", "StructureMap", "draw_abdomen"]

STRUCTURES: dict[str, str] = {
    "subcutaneous fat": "fat",
    "body wall": "muscle",
    "visceral fat": "fat",
    "bowel": "bowel",
    "stomach": "bowel",
    "kidneys": "kidney",
    "spleen": "spleen",
    "liver right": "liver",
    "liver left": "liver",
    "vessels right": "blood",
    "vessels left": "blood",
    "gallbladder": "fluid",
    "vena cava": "blood",
    "aorta": "blood",
    "paraspinal muscle": "muscle",
    "vertebra": "marrow",
    "spinal canal": "fluid",
}
"""Structure -> tissue. A structure's label is its place in this table, from 1; 0 is air."""

TISSUES: tuple[str, ...] = tuple(dict.fromkeys(STRUCTURES.values()))
"""The tissues that a recipe for an abdomen has to describe."""

_REFERENCE_CAVITY_MM = (146.0, 94.0)
"""Half axes of the abdominal cavity that the shapes below were set for."""

_BODY_POWER = 2.35
"""A trunk is a little boxier than an ellipse."""

_ENDLESS = math.inf

_LIVER = (
    Ellipsoid(centre_mm=(75, 4, 0), radii_mm=(77, 88, 112), turn_deg=-8, power=2.3),
    Ellipsoid(centre_mm=(18, 46, 14), radii_mm=(66, 34, 62), turn_deg=10),
)
"""Right lobe, left lobe."""

_NOT_LIVER = (
    Ellipsoid(centre_mm=(4, -44, 0), radii_mm=(46, 46, _ENDLESS)),
    Ellipsoid(centre_mm=(20, 2, -40), radii_mm=(26, 20, 46), turn_deg=20),
)
"""Spine with crura, and the porta hepatis."""

_LOBE_BORDER_MM = 30.0
"""The border between the lobes in the front of the liver, right of the midline."""

_VESSELS = (
    # Hepatic veins, gathering towards the vena cava at the top.
    Tube(start_mm=(30, -8, 52), end_mm=(112, 14, 6), start_radius_mm=8.5, end_radius_mm=4.2),
    Tube(start_mm=(30, -6, 52), end_mm=(62, 56, 4), start_radius_mm=7.8, end_radius_mm=3.9),
    Tube(start_mm=(26, -2, 52), end_mm=(2, 54, 20), start_radius_mm=6.5, end_radius_mm=3.4),
    Tube(start_mm=(84, 6, 22), end_mm=(104, -34, -4), start_radius_mm=5.2, end_radius_mm=3.4),
    # Portal vein and its branches.
    Tube(start_mm=(26, 6, -34), end_mm=(62, 4, -8), start_radius_mm=9.8, end_radius_mm=7.8),
    Tube(start_mm=(62, 4, -8), end_mm=(92, 34, 6), start_radius_mm=6.5, end_radius_mm=3.9),
    Tube(start_mm=(62, 4, -8), end_mm=(106, -28, -24), start_radius_mm=6.5, end_radius_mm=3.9),
    Tube(start_mm=(92, 34, 6), end_mm=(122, 28, 24), start_radius_mm=4.2, end_radius_mm=3.1),
    Tube(start_mm=(82, -10, -16), end_mm=(92, -12, -60), start_radius_mm=5.2, end_radius_mm=3.4),
    Tube(start_mm=(74, 16, -3), end_mm=(84, 50, -46), start_radius_mm=5.2, end_radius_mm=3.4),
    Tube(start_mm=(40, 6, -20), end_mm=(10, 44, 4), start_radius_mm=6.5, end_radius_mm=3.9),
    Tube(start_mm=(10, 44, 4), end_mm=(-26, 44, 18), start_radius_mm=4.7, end_radius_mm=3.1),
)

_SPLEEN = Ellipsoid(centre_mm=(-108, -34, 14), radii_mm=(27, 56, 62), turn_deg=-24)
_SPLEEN_HILUM = Ellipsoid(centre_mm=(-78, -20, 6), radii_mm=(18, 30, 46), turn_deg=-24)
_STOMACH = Ellipsoid(centre_mm=(-70, 34, 18), radii_mm=(46, 34, 58), turn_deg=14)
_BOWEL = (
    Ellipsoid(centre_mm=(-62, 40, -66), radii_mm=(52, 30, 34)),
    Ellipsoid(centre_mm=(-112, 12, -58), radii_mm=(20, 26, 40)),
    Ellipsoid(centre_mm=(-8, 54, -72), radii_mm=(40, 26, 28)),
)
_KIDNEYS = (
    Ellipsoid(centre_mm=(62, -50, -62), radii_mm=(25, 29, 54), turn_deg=-20),
    Ellipsoid(centre_mm=(-62, -50, -44), radii_mm=(25, 29, 54), turn_deg=20),
)
_GALLBLADDER = Ellipsoid(centre_mm=(52, 44, -52), radii_mm=(13, 22, 26), turn_deg=-20)
_VENA_CAVA = Ellipsoid(centre_mm=(27, -8, 0), radii_mm=(13, 9.5, _ENDLESS), turn_deg=12)
_AORTA = Ellipsoid(centre_mm=(-11, -13, 0), radii_mm=(10.5, 10.5, _ENDLESS))
_PARASPINAL = (
    Ellipsoid(centre_mm=(34, -79, 0), radii_mm=(29, 18, _ENDLESS), turn_deg=-12),
    Ellipsoid(centre_mm=(-34, -79, 0), radii_mm=(29, 18, _ENDLESS), turn_deg=12),
)
_VERTEBRA = (
    Ellipsoid(centre_mm=(0, -42, 0), radii_mm=(23, 17, _ENDLESS)),
    Ellipsoid(centre_mm=(0, -66, 0), radii_mm=(17, 13, _ENDLESS)),
    Ellipsoid(centre_mm=(0, -84, 0), radii_mm=(4.5, 18, _ENDLESS)),
)
_CANAL = Ellipsoid(centre_mm=(0, -65, 0), radii_mm=(9, 7.5, _ENDLESS))


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class StructureMap:
    """The structure of each voxel.

    Attributes
    ----------
    labels : ndarray of uint8, shape (X, Y, Z)
        0 air, else the place of the structure in `names`, from 1.
    names, tissues : tuple of str
        Of label 1, 2, ...
    """

    labels: NDArray[np.uint8]
    names: tuple[str, ...] = tuple(STRUCTURES)
    tissues: tuple[str, ...] = tuple(STRUCTURES.values())

    def __post_init__(self) -> None:
        labels = np.array(self.labels, dtype=np.uint8, copy=True)
        labels.flags.writeable = False
        object.__setattr__(self, "labels", labels)

    def mask(self, structures: tuple[str, ...]) -> NDArray[np.bool_]:
        """Find the voxels of some structures; bool, shape (X, Y, Z)."""
        wanted = np.zeros(len(self.names) + 1, dtype=bool)
        wanted[[self.names.index(name) + 1 for name in structures]] = True
        return np.asarray(wanted[self.labels])


def draw_abdomen(grid: Grid, plan: AnatomyPlan) -> StructureMap:
    """Draw the abdomen on a grid: a voxel belongs to what lies at its centre.

    Parameters
    ----------
    grid : Grid
        Any size and orientation; the body's middle is at the origin.
    plan : AnatomyPlan
        Size of the body, of its fat layer and of its wall.

    Returns
    -------
    StructureMap
        Labels of every voxel.
    """
    right, anterior, superior = coordinates_mm(grid)
    half_mm = (plan.body_half_width_mm, plan.body_half_depth_mm)
    inset_mm = plan.fat_layer_mm + plan.body_wall_mm
    stretch = [
        (half - inset_mm) / reference
        for half, reference in zip(half_mm, _REFERENCE_CAVITY_MM, strict=True)
    ]
    # Inner shapes are tested where the reference body would have this point.
    at = (right / stretch[0], anterior / stretch[1], superior)
    real = (right, anterior, superior)
    body = _trunk(half_mm, 0.0).contains(real)
    muscle = _trunk(half_mm, plan.fat_layer_mm).contains(real)
    cavity = _trunk(half_mm, inset_mm).contains(real)
    paint = _Canvas(grid.shape)
    paint.add("subcutaneous fat", body)
    paint.add("body wall", muscle)
    paint.add("visceral fat", cavity)
    for name, solids in (("bowel", _BOWEL), ("stomach", (_STOMACH,)), ("kidneys", _KIDNEYS)):
        paint.add(name, _any(solids, at) & cavity)
    paint.add("spleen", _SPLEEN.contains(at) & ~_SPLEEN_HILUM.contains(at) & cavity)
    _paint_liver(paint, at, cavity)
    paint.add("vena cava", _VENA_CAVA.contains(at))
    paint.add("aorta", _AORTA.contains(at))
    paint.add("paraspinal muscle", _any(_PARASPINAL, at) & muscle)
    paint.add("vertebra", _any(_VERTEBRA, at) & muscle)
    paint.add("spinal canal", _CANAL.contains(at))
    return StructureMap(labels=paint.labels)


def _paint_liver(paint: _Canvas, at: Coordinates, cavity: NDArray[np.bool_]) -> None:
    right_lobe, left_lobe = (solid.contains(at) for solid in _LIVER)
    space = cavity & ~_any(_NOT_LIVER, at) & ~_any(_KIDNEYS, at)
    # Behind the porta all of the right lobe's ellipsoid is right; in front the border parts them.
    is_right = right_lobe & (at[0] > _LOBE_BORDER_MM)
    paint.add("liver right", is_right & space)
    paint.add("liver left", (right_lobe | left_lobe) & ~is_right & space)
    vessels = _any(_VESSELS, at)
    paint.add("vessels right", vessels & is_right & space)
    paint.add("vessels left", vessels & (right_lobe | left_lobe) & ~is_right & space)
    paint.add("gallbladder", _GALLBLADDER.contains(at) & cavity)


def _trunk(half_mm: tuple[float, float], inset_mm: float) -> Ellipsoid:
    return Ellipsoid(
        centre_mm=(0, 0, 0),
        radii_mm=(half_mm[0] - inset_mm, half_mm[1] - inset_mm, _ENDLESS),
        power=_BODY_POWER,
    )


def _any(solids: tuple[Ellipsoid | Tube, ...], at: Coordinates) -> NDArray[np.bool_]:
    inside = solids[0].contains(at)
    for solid in solids[1:]:
        inside = inside | solid.contains(at)
    return inside


class _Canvas:
    """Labels under the brush: what is painted later lies on top."""

    def __init__(self, shape: tuple[int, int, int]) -> None:
        self.labels = np.zeros(shape, dtype=np.uint8)
        self._order = tuple(STRUCTURES)

    def add(self, structure: str, where: NDArray[np.bool_]) -> None:
        np.copyto(self.labels, np.uint8(self._order.index(structure) + 1), where=where)
