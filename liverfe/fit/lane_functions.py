"""Exponential, logarithm and polynomials for sixteen voxels at a time.

Coefficients are near the best for their degree (Chebyshev fits); the errors are those in single
precision, measured in the tests.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from liverfe.fit.lanes import (
    binary_exponent,
    everywhere,
    fused,
    inner_lanes,
    larger,
    nearest_whole,
    smaller,
    times_power_of_two,
)

Array32 = NDArray[np.float32]

_ANEW = 4
_NOTHING = 1e-13
"""As good as nothing, and its square still a normal number: others cost a hundredfold time."""
_LN2 = 0.6931471805599453
_LOG2_E = 1.4426950408889634
_LN2_HIGH, _LN2_LOW = 0.693359375, -2.12194440e-4
"""ln 2 in two parts of which the first is exact in single precision when multiplied by a small
whole number (Cody and Waite)."""


@inner_lanes
def exp(x: Any) -> Any:
    """e to the x, from e**-30 (as good as nothing, and its square still a normal number) to e**40.

    Nearly minimax up to half of ln 2, error 3e-9.
    """
    x = larger(smaller(x, everywhere(40.0)), everywhere(-30.0))
    k = nearest_whole(x * everywhere(_LOG2_E))
    r = fused(k, everywhere(-_LN2_LOW), fused(k, everywhere(-_LN2_HIGH), x))
    p = fused(everywhere(0.00139485928), r, everywhere(0.00837513727))
    p = fused(fused(p, r, everywhere(0.0416662181)), r, everywhere(0.166664154))
    p = fused(fused(p, r, everywhere(0.500000011)), r, everywhere(1.00000004))
    return times_power_of_two(fused(p, r, everywhere(1.0)), k)


@inner_lanes
def rough_log(x: Any) -> Any:
    """Natural logarithm of positive, normal numbers, error 8e-5: good enough to start from."""
    k = binary_exponent(x)
    r = times_power_of_two(x, everywhere(0.0) - k) - everywhere(1.0)
    p = fused(everywhere(-0.2287921), r, everywhere(0.3594803))
    p = fused(fused(p, r, everywhere(-0.502499)), r, everywhere(0.9992738))
    return fused(k, everywhere(_LN2), p * r)


@inner_lanes
def amplitude_at(
    e: int, times: Array32, is_even: bool, log_a: Any, rate: Any, before: Any, factor: Any
) -> Any:
    """Amplitude at echo `e` of a decay; between echoes of even spacing it falls by `factor`.

    Every fourth echo is worked out anew, so that rounding does not add up.
    """
    if is_even and e % _ANEW != 0:
        return larger(before * factor, everywhere(_NOTHING))
    return exp(fused(rate, everywhere(times[0] - times[e]), log_a))


@inner_lanes
def sixth_degree(c: Array32, x: Any) -> Any:
    """Horner's rule for seven coefficients, written out: a loop would not be unrolled."""
    p = fused(everywhere(c[0]), x, everywhere(c[1]))
    p = fused(fused(p, x, everywhere(c[2])), x, everywhere(c[3]))
    p = fused(fused(p, x, everywhere(c[4])), x, everywhere(c[5]))
    return fused(p, x, everywhere(c[6]))


@inner_lanes
def fifth_degree(c: Array32, x: Any) -> Any:
    """Horner's rule for six coefficients."""
    p = fused(everywhere(c[0]), x, everywhere(c[1]))
    p = fused(fused(p, x, everywhere(c[2])), x, everywhere(c[3]))
    return fused(fused(p, x, everywhere(c[4])), x, everywhere(c[5]))


@inner_lanes
def fourth_degree(c: Array32, x: Any) -> Any:
    """Horner's rule for five coefficients."""
    p = fused(everywhere(c[0]), x, everywhere(c[1]))
    p = fused(fused(p, x, everywhere(c[2])), x, everywhere(c[3]))
    return fused(p, x, everywhere(c[4]))
