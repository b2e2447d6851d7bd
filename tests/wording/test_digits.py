"""The digits that a reader sees."""

from __future__ import annotations

import math
from decimal import ROUND_HALF_EVEN, Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from liverfe.wording import NOT_KNOWN, shown


@pytest.mark.parametrize(
    ("value", "quantity", "text"),
    [
        # The numbers of the contract's example, and what they must look like at other sizes.
        (7.97, "lic_mg_per_g", "7.97"),
        (29.3, "lic_mg_per_g", "29.3"),
        (0.3449, "lic_mg_per_g", "0.34"),
        (9.994, "lic_mg_per_g", "9.99"),
        (9.996, "lic_mg_per_g", "10.0"),
        (99.96, "lic_mg_per_g", "100"),
        (-0.16, "lic_mg_per_g", "-0.16"),
        (312.4, "r2star_per_s", "312.4"),
        (1130.0, "r2star_per_s", "1130.0"),
        (3.2, "t2star_ms", "3.20"),
        (142.7, "lic_umol_per_g", "142.7"),
        (1.016, "lic_change_mg_per_g", "1.0"),
        (0.132, "lic_change_mg_per_g", "0.13"),
        (0.0, "lic_mg_per_g", "0.00"),
        (-0.001, "lic_mg_per_g", "0.00"),
    ],
)
def test_numbers_are_written_with_the_digits_that_they_are_worth(
    value: float, quantity: str, text: str
) -> None:
    assert shown(value, quantity) == text


@pytest.mark.parametrize("value", [None, math.nan, math.inf, -math.inf])
def test_what_is_not_a_number_is_never_written_as_one(value: float | None) -> None:
    assert shown(value, "lic_mg_per_g") == NOT_KNOWN


@given(st.floats(min_value=-5.0, max_value=9.99))
def test_lic_below_ten_is_the_six_digit_number_rounded_half_even_to_two_decimals(
    value: float,
) -> None:
    stated = Decimal(float(f"{value:.6g}"))
    wanted = stated.quantize(Decimal("0.01"), rounding=ROUND_HALF_EVEN)
    assert Decimal(shown(value, "lic_mg_per_g")) == wanted


@given(st.floats(min_value=0.0, max_value=3000.0))
def test_rounding_the_number_in_the_result_file_gives_the_number_on_paper(value: float) -> None:
    in_the_file = float(f"{value:.6g}")
    for quantity in ("lic_mg_per_g", "r2star_per_s", "lic_umol_per_g", "t2star_ms"):
        assert shown(in_the_file, quantity) == shown(value, quantity)


@given(st.floats(min_value=0.0, max_value=1e6))
def test_lic_never_shows_more_than_three_digits_while_it_is_below_a_thousand(value: float) -> None:
    digits = shown(value, "lic_mg_per_g").replace(".", "").lstrip("0")
    assert len(digits) <= 3 or value >= 999.5
