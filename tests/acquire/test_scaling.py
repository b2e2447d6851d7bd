"""Each image is scaled once, by its own scale, before it is stacked (faults B11 to B14)."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from pydicom.dataset import Dataset

from liverfe.acquire import find_stacks, load_stack
from tests.acquire import dicom_study as made

TRUE = made.stored_object().astype(np.float64)
"""True values; stored values below are these, scaled by what the header says."""


def stack_of(folder: Path) -> tuple[Any, list[str]]:
    (plan,) = find_stacks([folder]).stacks
    assert plan.refusal is None, plan.refusal
    return load_stack(plan).stack, [finding.code for finding in plan.findings]


def add_precise_slope(dataset: Dataset, slope: float) -> None:
    # Another creator first, so that the block is not where it usually is.
    dataset.private_block(0x2005, "INVENTED", create=True).add_new(0x01, "LO", "x")
    block = dataset.private_block(0x2005, "Philips MR Imaging DD 001", create=True)
    block.add_new(0x0E, "FL", slope)


def test_intercept_is_added_after_the_slope(tmp_path: Path) -> None:
    """B13: stored = (true + 100) / 0.5."""

    def change(dataset: Dataset, echo: int, k: int) -> None:
        dataset.RescaleSlope, dataset.RescaleIntercept = 0.5, -100

    stack, codes = stack_of(made.write_study(tmp_path, (TRUE / 4 + 100) * 2, change=change))
    wanted = np.floor((TRUE / 4 + 100) * 2) / 2 - 100
    np.testing.assert_allclose(stack.magnitude, made.expected_magnitude(wanted), rtol=1e-6)
    assert codes == []


def test_slopes_that_differ_by_slice_are_each_applied(tmp_path: Path) -> None:
    """B11: normalised slice by slice; a single slope for all would be up to 25 % off."""
    slopes = np.array([1.0, 0.5, 2.0, 0.25, 1.0])

    def change(dataset: Dataset, echo: int, k: int) -> None:
        dataset.RescaleSlope, dataset.RescaleIntercept = slopes[k], 0

    stored = np.rint(TRUE / 4 / slopes[None, :, None, None])
    stack, codes = stack_of(made.write_study(tmp_path, stored, change=change))
    wanted = stored * slopes[None, :, None, None]
    np.testing.assert_array_equal(stack.magnitude, made.expected_magnitude(wanted))
    assert codes == [], "every echo has the same slopes"


def test_slopes_that_differ_by_echo_are_applied_and_flagged(tmp_path: Path) -> None:
    slopes = np.array([1.0, 0.5, 0.5, 0.25])

    def change(dataset: Dataset, echo: int, k: int) -> None:
        dataset.RescaleSlope, dataset.RescaleIntercept = slopes[echo], 0

    stored = np.rint(TRUE / 4 / slopes[:, None, None, None])
    stack, codes = stack_of(made.write_study(tmp_path, stored, change=change))
    wanted = stored * slopes[:, None, None, None]
    np.testing.assert_array_equal(stack.magnitude, made.expected_magnitude(wanted))
    assert codes == ["rescale-differs"]


def test_an_intercept_of_one_image_alone_is_flagged(tmp_path: Path) -> None:
    def change(dataset: Dataset, echo: int, k: int) -> None:
        dataset.RescaleSlope, dataset.RescaleIntercept = 1, 9 if (echo, k) == (2, 3) else 0

    stack, codes = stack_of(made.write_study(tmp_path, TRUE, change=change))
    assert codes == ["rescale-differs"]
    wanted = TRUE.copy()
    wanted[2, 3] += 9
    np.testing.assert_array_equal(stack.magnitude, made.expected_magnitude(wanted))


def test_display_slopes_of_philips_give_way_to_the_precise_scale(tmp_path: Path) -> None:
    """B12: P = (stored RS + RI) / (RS SS); standards sheet 1.3, Chenevert 2014 (secondary)."""
    display = np.array([2.0, 1.5, 1.0, 0.5])
    precise = np.array([0.01, 0.02, 0.04, 0.05])

    def change(dataset: Dataset, echo: int, k: int) -> None:
        dataset.Manufacturer = "Philips"
        dataset.RescaleSlope, dataset.RescaleIntercept = display[echo], 0
        add_precise_slope(dataset, precise[echo])

    stored = np.rint(TRUE / 4 * precise[:, None, None, None] * 50)
    folder = made.write_study(tmp_path, stored, change=change)
    stack, codes = stack_of(folder)
    wanted = stored / precise.astype(np.float32).astype(float)[:, None, None, None]
    np.testing.assert_allclose(stack.magnitude, made.expected_magnitude(wanted), rtol=1e-6)
    assert codes == ["precise-scaling-used"]


def test_precise_scale_is_left_alone_where_all_echoes_share_it(tmp_path: Path) -> None:
    def change(dataset: Dataset, echo: int, k: int) -> None:
        dataset.Manufacturer = "Philips"
        dataset.RescaleSlope, dataset.RescaleIntercept = 2.0, 0
        add_precise_slope(dataset, 0.01)

    stored = np.rint(TRUE / 4)
    stack, codes = stack_of(made.write_study(tmp_path, stored, change=change))
    np.testing.assert_array_equal(stack.magnitude, made.expected_magnitude(stored * 2))
    assert codes == []


def test_display_slopes_of_several_philips_series_without_precise_scale_are_refused(
    tmp_path: Path,
) -> None:
    def change(dataset: Dataset, echo: int, k: int) -> None:
        dataset.Manufacturer = "Philips"
        dataset.RescaleSlope, dataset.RescaleIntercept = 1.0 + echo, 0

    made.write_study(tmp_path, change=change, series_of_echo=lambda echo: 4 + echo)
    (plan,) = find_stacks([tmp_path]).stacks
    assert plan.refusal is not None
    assert plan.refusal.code == "precise-scaling-missing"
    assert "(2005,100E)" in plan.refusal.text


@pytest.mark.parametrize("bits", [8, 16, 32])
@pytest.mark.parametrize("signed", [0, 1])
def test_stored_values_of_every_width_are_read(tmp_path: Path, bits: int, signed: int) -> None:
    kind = f"<{'i' if signed else 'u'}{bits // 8}"
    stored = np.minimum(made.stored_object() // 20, 120)

    def change(dataset: Dataset, echo: int, k: int) -> None:
        dataset.BitsAllocated, dataset.BitsStored, dataset.HighBit = bits, bits, bits - 1
        dataset.PixelRepresentation = signed
        dataset.PixelData = stored[echo, k].astype(kind).tobytes()

    stack, _ = stack_of(made.write_study(tmp_path, stored, change=change))
    np.testing.assert_array_equal(stack.magnitude, made.expected_magnitude(stored))
