"""Each row of the table, in a small cut; and each is missed where a fault is planted."""

from __future__ import annotations

import json
import time
from collections.abc import Callable

import numpy as np
import pytest

from tests.statistics.cells import Cell, Row
from tests.statistics.cost import (
    LogLinear,
    curve_fit_loop,
    measure_curve_fit,
    measure_memory,
    measure_speed,
    voxels,
)
from tests.statistics.cost import house as timed_house
from tests.statistics.coverage import measure_coverage
from tests.statistics.limit import measure_limit
from tests.statistics.optimum import maximise, measure_optimum
from tests.statistics.precision import measure_precision, measure_region_bias, named
from tests.statistics.sigma import measure_sigma
from tests.statistics.table import KEYS, MEASURES, as_document, main
from tests.statistics.truth import TWELVE_MS, Array, decay


def told(row: Row) -> str:
    """What a failing test shows."""
    missed = [f"{cell.where}: {cell.text} {cell.note}" for cell in row.missed]
    return f"{row.key}: {row.measured}: {missed}"


@pytest.fixture(scope="module")
def precision() -> tuple[Row, Row]:
    return measure_precision(full=False)


def test_rmse_stands_at_the_cramer_rao_bound(precision: tuple[Row, Row]) -> None:
    assert precision[0].reached, told(precision[0])
    assert len(precision[0].cells) >= 30


def test_medians_of_voxels_are_true(precision: tuple[Row, Row]) -> None:
    assert precision[1].reached, told(precision[1])


def test_medians_of_regions_are_true() -> None:
    row = measure_region_bias(full=False)
    assert row.reached, told(row)


def test_intervals_hold_the_truth_as_often_as_they_say() -> None:
    row = measure_coverage(full=False)
    assert row.reached, told(row)


def test_sigma_in_the_liver_is_found() -> None:
    row = measure_sigma(full=False)
    assert row.reached, told(row)


def test_beyond_the_limit_no_number_stands() -> None:
    row = measure_limit(full=False)
    assert row.reached, told(row)


def test_the_optimum_is_scipys() -> None:
    row = measure_optimum(full=False)
    assert row.reached, told(row)


@pytest.mark.bench
def test_memory_stays_below_the_input() -> None:
    row = measure_memory(full=False)
    assert row.reached, told(row)


@pytest.mark.bench
def test_speed_is_measured_beside_its_peers() -> None:
    """How fast depends on who else is at work: here only that both are measured and told."""
    speed, loop = measure_speed(full=False), measure_curve_fit(full=False)
    assert 0.1 < speed.cells[0].measured < 100
    assert "roofline" in " ".join(speed.remarks)
    assert loop.cells[0].measured > 50


# ------------------------------------------------------------------- each check is seen to fail


@pytest.mark.parametrize("estimator", ["log-linear", "least-squares"])
def test_comparators_miss_the_rows_of_precision(estimator: str) -> None:
    rmse, bias = measure_precision(full=False, estimate=named(estimator))
    assert not rmse.reached
    assert not bias.reached
    assert not measure_region_bias(full=False, estimate=named(estimator)).reached


def test_a_second_moment_is_true_and_misses_the_bound() -> None:
    rmse, bias = measure_precision(full=False, estimate=named("second-moment"))
    assert not rmse.reached
    assert bias.reached


def test_lost_voxels_are_missed() -> None:
    def forgetful(signal: object, times_ms: Array) -> Array:
        found = named("rician-ml")(signal, times_ms)  # type: ignore[arg-type]
        return np.where(np.arange(len(found)) % 100 == 0, np.nan, found)

    rmse, bias = measure_precision(full=False, estimate=forgetful)
    assert not rmse.reached
    assert not bias.reached


def test_intervals_of_another_level_miss_the_coverage() -> None:
    assert not measure_coverage(full=False, choices={"interval": 0.6}).reached


def test_sigma_from_air_alone_misses_a_ramp() -> None:
    row = measure_sigma(full=False, choices={"noise": "air"})
    assert {cell.where.split(",")[0] for cell in row.missed} >= {"noise ramp x 3"}


def test_a_fit_that_turns_back_misses_the_limit() -> None:
    """Log-linear: what lies beyond the limit reads as little iron."""
    row = measure_limit(full=False, choices={"estimator": "log-linear"})
    assert not row.reached


def test_maps_that_show_what_is_not_resolved_miss_the_limit() -> None:
    row = measure_limit(full=False, choices={"voxel_relative_se": 0.3})
    assert {cell.where.split(", ")[-1] for cell in row.missed} >= {"maps alone"}


def test_another_estimator_misses_the_optimum() -> None:
    def moment(signal: object, times_ms: Array, n: int) -> Array:
        return np.full(len(signal), np.nan) if n > 1 else named("first-moment")(signal, times_ms)  # type: ignore[arg-type]

    assert not measure_optimum(full=False, fit=moment).reached


@pytest.mark.bench
def test_a_slow_fit_and_a_wasteful_one_are_missed() -> None:
    def slow(signal: object, times_ms: Array) -> object:
        if len(signal) > 2000:  # type: ignore[arg-type]
            time.sleep(0.4)
        return timed_house(signal, times_ms)  # type: ignore[arg-type]

    assert not measure_speed(full=False, fit=slow).reached
    assert not measure_memory(full=False, copies=2).reached


# ------------------------------------------------------------------------- the peers are fair


def test_the_peers_measure_what_they_should() -> None:
    clean = decay(np.array([40.0, 90.0]), np.array([80.0, 350.0]), TWELVE_MS).astype(np.float32)
    assert LogLinear(clean, TWELVE_MS)()[1] == pytest.approx([80.0, 350.0], rel=1e-4)
    assert curve_fit_loop(clean[:1] * 100, TWELVE_MS)[0] == pytest.approx(80.0, rel=1e-3)
    assert maximise(clean[0] * 100.0, TWELVE_MS) == pytest.approx(80.0, rel=1e-3)


def test_timed_voxels_are_tissue() -> None:
    signal = voxels(2000, np.random.default_rng(1))
    assert signal.dtype == np.float32
    assert (signal[:, 0] > 4).mean() > 0.99


# ---------------------------------------------------------------------------------- the table


def test_a_measured_row_can_be_written_as_json(precision: tuple[Row, Row]) -> None:
    text = json.dumps([as_document(row) for row in precision])
    assert [row["reached"] for row in json.loads(text)] == [True, True]


def test_every_row_has_its_key_and_a_row_without_cells_is_not_reached() -> None:
    assert len(set(KEYS)) == len(KEYS) == sum(len(keys) for keys in MEASURES)
    empty = Row(key="k", what="w", asked="a", measured="m", cells=())
    assert not empty.reached
    cell = Cell(where="w", measured=float("nan"), text="t", reached=False)
    row = Row(key="k", what="w", asked="a", measured="m", cells=(cell,))
    assert as_document(row)["cells"][0]["measured"] is None
    assert row.missed == (cell,)


@pytest.mark.parametrize(("reached", "status"), [(True, 0), (False, 1)])
def test_the_status_says_whether_a_row_was_missed(
    reached: bool,
    status: int,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    cell = Cell(where="w", measured=1.0, text="1", reached=reached)
    row = Row(key="limit", what="w", asked="a", measured="m", cells=(cell,))
    measure: Callable[..., list[Row]] = lambda full, say: [row]  # noqa: E731
    monkeypatch.setitem(MEASURES, ("limit",), measure)
    assert main(["--only", "limit"]) == status
    assert ("yes" if reached else "NO") in capsys.readouterr().out
