"""Sigma in the liver within 3 %, whatever was done to air and noise: the row of issue and sheet."""

from __future__ import annotations

import pytest

from tests.noise.recovery import KINDS, sigma_recovery

pytestmark = pytest.mark.slow


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("n", [1, 2, 4, 8, 16, 32])
def test_sigma_in_the_liver_is_right_to_3_percent(kind: str, n: int) -> None:
    share, channels, between = sigma_recovery(kind, 150.0, 30.0, n, seed=n)
    assert share == pytest.approx(1.0, abs=0.03)
    low, high = between or (channels, channels)
    assert 0.8 * low <= n <= 1.2 * high


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("rate", [30.0, 300.0, 800.0])
@pytest.mark.parametrize("snr", [20.0, 100.0])
def test_nor_does_it_hang_on_iron_or_snr(kind: str, rate: float, snr: float) -> None:
    share, channels, _ = sigma_recovery(kind, rate, snr, 1, seed=3)
    # A sharp edge of a hundred sigma rings into the air when the spectrum is cut off: 5 % there.
    allowed = 0.05 if (kind, snr) == ("zero-filled x2", 100.0) else 0.03
    assert share == pytest.approx(1.0, abs=allowed)
    assert channels == 1
