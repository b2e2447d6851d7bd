"""Solids against textbook volumes and places."""

from __future__ import annotations

import math

import numpy as np
import pytest

from liverfe.grid import Grid
from liverfe.phantom.solids import Ellipsoid, Tube, coordinates_mm

VOXEL_MM = 0.5


def cube() -> Grid:
    """A fine grid of 60 mm each way; no face of a solid falls on its planes."""
    affine = np.diag([VOXEL_MM, VOXEL_MM, VOXEL_MM, 1.0])
    affine[:3, 3] = -29.87
    return Grid(shape=(121, 121, 121), affine_mm=affine)


def volume_mm3(solid: Ellipsoid | Tube) -> float:
    inside = np.broadcast_to(solid.contains(coordinates_mm(cube())), cube().shape)
    return float(inside.sum()) * VOXEL_MM**3


def holds(solid: Ellipsoid | Tube, *point_mm: float) -> bool:
    affine = np.eye(4)
    affine[:3, 3] = point_mm
    return bool(solid.contains(coordinates_mm(Grid(shape=(1, 1, 1), affine_mm=affine))).all())


def test_an_ellipsoid_has_its_volume_however_it_is_turned() -> None:
    solid = Ellipsoid(centre_mm=(2.0, -3.0, 1.0), radii_mm=(20.0, 10.0, 15.0), turn_deg=30.0)
    assert volume_mm3(solid) == pytest.approx(4 / 3 * math.pi * 20 * 10 * 15, rel=0.003)


def test_a_turn_goes_from_right_to_front() -> None:
    # Turned by 30 degrees about +z (superior), the long axis +x leans towards +y (anterior).
    solid = Ellipsoid(centre_mm=(0.0, 0.0, 0.0), radii_mm=(20.0, 5.0, 5.0), turn_deg=30.0)
    tip = (19.0 * math.cos(math.radians(30)), 19.0 * math.sin(math.radians(30)))
    assert holds(solid, tip[0], tip[1], 0.0)
    assert not holds(solid, tip[0], -tip[1], 0.0)


def test_a_higher_power_is_boxier_and_an_endless_radius_is_a_cylinder() -> None:
    box = Ellipsoid(centre_mm=(0, 0, 0), radii_mm=(20.0, 20.0, math.inf), power=4.0)
    # Area of |x/a|^4 + |y/a|^4 <= 1 is 4 a^2 Gamma(5/4)^2 / Gamma(3/2).
    area_mm2 = 4 * 400 * math.gamma(1.25) ** 2 / math.gamma(1.5)
    assert volume_mm3(box) == pytest.approx(area_mm2 * 60.5, rel=0.003)
    assert holds(box, 0.0, 0.0, 5000.0)


def test_a_tube_has_the_volume_of_a_cylinder_with_half_balls() -> None:
    tube = Tube(
        start_mm=(-10.0, -5.0, 0.0), end_mm=(10.0, 5.0, 5.0), start_radius_mm=4, end_radius_mm=4
    )
    length_mm = math.sqrt(20**2 + 10**2 + 5**2)
    expected = math.pi * 16 * length_mm + 4 / 3 * math.pi * 64
    assert volume_mm3(tube) == pytest.approx(expected, rel=0.003)


def test_a_tube_narrows_from_start_to_end() -> None:
    tube = Tube(start_mm=(0, 0, 0), end_mm=(20.0, 0, 0), start_radius_mm=6, end_radius_mm=2)
    assert holds(tube, 0.0, 5.9, 0.0)
    assert holds(tube, 10.0, 0.0, 3.9)
    assert not holds(tube, 10.0, 0.0, 4.1)
    assert not holds(tube, 22.1, 0.0, 0.0)


def test_coordinates_are_the_grids_own_however_it_is_turned(phantom) -> None:
    x, y, z = np.broadcast_arrays(*coordinates_mm(phantom.grid))
    index = (7, 50, 3)
    np.testing.assert_allclose((x[index], y[index], z[index]), phantom.grid.to_mm(index))
    assert x.shape == phantom.grid.shape
