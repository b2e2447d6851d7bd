"""Conversions against numbers worked out elsewhere."""

from __future__ import annotations

import math

import numpy as np
import pytest

from liverfe import units


def test_a_milligram_of_iron_is_17_9_micromoles() -> None:
    # 1000 / 55.845, the standard atomic weight of iron (IUPAC): 17.9067.
    assert units.lic_umol_per_g_from_mg_per_g(1.0) == pytest.approx(17.9067, abs=5e-5)
    assert units.mg_per_g_from_umol_per_g(36.0) == pytest.approx(2.0104, abs=5e-5)


def test_r2star_and_t2star_are_each_other_s_inverse_by_seconds() -> None:
    assert units.t2star_ms_from_r2star_per_s(500.0) == 2.0
    assert units.r2star_per_s_from_t2star_ms(2.0) == 500.0


@pytest.mark.parametrize("r2star_per_s", [0.0, -3.0, math.nan])
def test_no_decay_has_no_t2star(r2star_per_s: float) -> None:
    assert math.isnan(units.t2star_ms_from_r2star_per_s(r2star_per_s))
    array = np.array([r2star_per_s, 250.0], dtype=np.float32)
    t2star_ms = units.t2star_ms_from_r2star_per_s(array)
    assert math.isnan(t2star_ms[0])
    assert t2star_ms[1] == 4.0
    assert t2star_ms.dtype == np.float32


@pytest.mark.parametrize(
    ("imaging_frequency_mhz", "field_t"),
    # Frequencies and fields of real scanners, as the data sheet beside the project states them.
    [(123.255, 2.895), (127.767, 3.001)],
)
def test_the_imaging_frequency_tells_the_field(
    imaging_frequency_mhz: float, field_t: float
) -> None:
    found = units.field_t_from_frequency_mhz(imaging_frequency_mhz)
    assert found == pytest.approx(field_t, abs=5e-4)


def test_times_and_volumes_convert_by_thousands() -> None:
    assert units.ms_from_s(0.0012) == pytest.approx(1.2)
    assert units.s_from_ms(1.2) == pytest.approx(0.0012)
    assert units.s_from_ms(np.array([1.0, 2.0])).tolist() == [0.001, 0.002]
    assert units.ml_from_mm3(1000.0) == 1.0
