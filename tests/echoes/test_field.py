"""Which field a scanner ran at: frequency over label, and neither guessed."""

from __future__ import annotations

import pytest

from liverfe.echoes import settle_field_strength

# Proton: 42.577478518 MHz/T (CODATA 2018). Frequencies of the real scanners beside the project.


@pytest.mark.parametrize(
    ("stated", "frequency", "field", "codes"),
    [
        (1.5, 63.87, 1.5, []),  # 1.5001 T
        (3.0, 127.767, 3.0, []),  # 3.001 T
        (3.0, 123.255, 2.895, ["field-from-frequency"]),
        (2.89, 123.263, 2.89, []),
        (None, 63.87, 1.500, ["field-from-frequency"]),
        (None, 123.255, 2.895, ["field-from-frequency"]),
        (1.5, None, 1.5, []),
        (1.5, 0.0, 1.5, []),
        (0.0, None, None, []),
        (-1.5, None, None, []),
        (None, None, None, []),
        (float("nan"), float("nan"), None, []),
        (1.5, 127.767, None, ["field-conflict"]),
        (3.0, 63.87, None, ["field-conflict"]),
        (0.5, 23.4, None, ["field-conflict"]),  # 0.55 T: 10 % off
        (15000.0, 63.87, None, ["field-conflict"]),  # stated in gauss
    ],
)
def test_field_is_settled(
    stated: float | None, frequency: float | None, field: float | None, codes: list[str]
) -> None:
    found, findings = settle_field_strength(stated, frequency)
    if field is None:
        assert found is None
    else:
        assert found == pytest.approx(field, abs=6e-4)
    assert [finding.code for finding in findings] == codes


def test_a_conflict_names_both_numbers() -> None:
    _, findings = settle_field_strength(1.5, 127.767)
    assert "1.5" in findings[0].text
    assert "3.001" in findings[0].text
