"""A stack of echoes is valid once born, and locked."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest

from liverfe.echoes import EchoStack
from liverfe.grid import Grid

GRID = Grid(shape=(3, 4, 2), affine_mm=np.eye(4))
TIMES_MS = np.array([1.0, 2.0, 3.5])


def stack(**changes: object) -> EchoStack:
    values = {"magnitude": np.ones((3, 4, 2, 3)), "echo_times_ms": TIMES_MS, "grid": GRID}
    return EchoStack(**(values | changes))  # type: ignore[arg-type]


@pytest.mark.parametrize(
    "times",
    [[3.0, 2.0, 1.0], [1.0, 1.0, 2.0], [0.0, 1.0, 2.0], [-1.0, 1.0, 2.0], [1.0, np.nan, 2.0],
     [1.0, 2.0, np.inf], [], [[1.0, 2.0, 3.0]]],
)  # fmt: skip
def test_echo_times_ascend_from_above_zero(times: list[float]) -> None:
    with pytest.raises(ValueError, match="echo_times_ms"):
        stack(echo_times_ms=np.array(times))


@pytest.mark.parametrize("shape", [(3, 4, 2), (4, 3, 2, 3), (3, 4, 2, 4), (3, 3, 4, 2)])
def test_magnitudes_fit_grid_and_echo_times(shape: tuple[int, ...]) -> None:
    with pytest.raises(ValueError, match="magnitude of shape"):
        stack(magnitude=np.ones(shape))


def test_the_table_of_images_fits_echoes_and_slices() -> None:
    with pytest.raises(ValueError, match="present of shape"):
        stack(present=np.ones((2, 3), dtype=bool))


def test_a_slice_is_complete_with_an_image_at_every_echo() -> None:
    present = np.array([[True, True], [True, False], [True, True]])
    assert stack(present=present).complete_slices.tolist() == [True, False]
    assert stack().complete_slices.tolist() == [True, True]
    assert stack().n_echoes == 3


def test_arrays_are_locked_copies_and_the_callers_stay_open() -> None:
    own = {
        "magnitude": np.arange(72, dtype=np.float32).reshape(3, 4, 2, 3),
        "echo_times_ms": TIMES_MS.copy(),
        "present": np.ones((3, 2), dtype=bool),
    }
    made = stack(**own)
    for name, array in own.items():
        locked = getattr(made, name)
        before = locked.copy()
        array += array.dtype.type(1)  # still the caller's to write ...
        np.testing.assert_array_equal(locked, before)  # ... and no longer ours
        with pytest.raises(ValueError, match="read-only"):
            locked[...] = 0
    with pytest.raises(dataclasses.FrozenInstanceError):
        made.layout = "other"  # type: ignore[misc]


def test_magnitudes_keep_their_place_whatever_their_memory_order() -> None:
    values = np.arange(72, dtype=np.float64).reshape(3, 4, 2, 3)
    made = stack(magnitude=np.asfortranarray(values))
    assert made.magnitude.dtype == np.float32
    assert made.magnitude.flags.c_contiguous
    np.testing.assert_array_equal(made.magnitude, values)
