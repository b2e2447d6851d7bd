"""How many digits of each quantity a reader sees: the only rounding of numbers for people.

A number is written by one rule, here; two places that show it cannot differ, and what a reader
gets by rounding the number in ``result.json``, which has six digits, is what stands on paper.
The rule follows what the numbers are worth. LIC keeps three digits and at most two decimals: its
measurement interval is rarely narrower than 1 %, and with fewer digits a value beside a threshold
(6.97 beside 7.0) would look as if it lay on it. R2* keeps one decimal.
"""

from __future__ import annotations

import math

__all__ = ["NOT_KNOWN", "shown"]

NOT_KNOWN = "–"
"""What stands where there is no number."""

_DECIMALS_AND_DIGITS: dict[str, tuple[int, int]] = {
    "lic_mg_per_g": (2, 3),
    "lic_change_mg_per_g": (2, 2),
    "lic_umol_per_g": (1, 4),
    "r2star_per_s": (1, 5),
    "t2star_ms": (2, 4),
    "volume_ml": (1, 5),
    "signal": (2, 4),
    "chi2": (2, 3),
}
"""For each quantity: most decimals, most digits of numbers below ten to that power."""


_STATED_DIGITS = 6
"""Significant digits of the numbers in ``result.json``."""


def shown(value: float | None, quantity: str) -> str:
    """Write a number as a reader sees it.

    Parameters
    ----------
    value : float or None
        The full value, in the unit that the quantity's name says.
    quantity : str
        ``lic_mg_per_g``, ``lic_change_mg_per_g``, ``lic_umol_per_g``, ``r2star_per_s``,
        ``t2star_ms``, ``volume_ml``, ``signal`` or ``chi2``.

    Returns
    -------
    str
        Plain decimals without exponent or unit; `NOT_KNOWN` for None, NaN and infinity.

    Raises
    ------
    KeyError
        If the quantity is not in the table.

    Examples
    --------
    >>> shown(7.9734, "lic_mg_per_g"), shown(9.996, "lic_mg_per_g"), shown(29.34, "lic_mg_per_g")
    ('7.97', '10.0', '29.3')
    >>> shown(-0.0004, "lic_mg_per_g"), shown(float("nan"), "lic_mg_per_g")
    ('0.00', '–')
    """
    most_decimals, most_digits = _DECIMALS_AND_DIGITS[quantity]
    if value is None or not math.isfinite(value):
        return NOT_KNOWN
    stated = float(f"{value:.{_STATED_DIGITS}g}")
    text = ""
    for decimals in range(most_decimals, -1, -1):
        text = f"{stated:.{decimals}f}"
        if abs(float(text)) < 10.0 ** (most_digits - decimals):
            break
    return text.removeprefix("-") if float(text) == 0.0 else text
