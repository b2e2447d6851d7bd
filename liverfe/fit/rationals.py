"""The signal equations as quotients of two polynomials, for the single-precision lanes.

Each of the three functions is smooth from 0 to infinity with a finite end, so one quotient of low
degree holds over the whole range (fitted by reweighted least squares, nearly minimax). Their errors
are 100 times below what moves R2* by a thousandth of its standard error; the tests prove them
against SciPy, for every number of channels.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.polynomial import chebyshev, polynomial
from numpy.typing import NDArray

from liverfe.fit import signal

Array = NDArray[np.float64]
Array32 = NDArray[np.float32]

_OF_SHORTFALL, _OF_EXCESS, _OF_INFORMATION = 6, 5, 4
"""Degrees of numerator and denominator: the first decides where a fit ends, the others only how
misfit and standard error are told."""
_NODES = 200
_ROUNDS = 25
_CLOSEST_TO_INFINITY = 1.0 - 1e-7
"""End of the fitted range of ``x / (x + scale)``: x up to ten million scales."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class SignalRationals:
    """Quotients for one number of channels: rows numerator and denominator, highest power first.

    Attributes
    ----------
    shortfall : ndarray of float32, shape (2, 7)
        ``z (1 - I_n(z) / I_{n-1}(z))`` over z: 0 at 0, n - 1/2 at infinity.
    excess : ndarray of float32, shape (2, 6)
        `signal.expected_excess` over a.
    information : ndarray of float32, shape (2, 5)
        `signal.information` over a².
    """

    shortfall: Array32
    excess: Array32
    information: Array32


@lru_cache(maxsize=8)
def signal_rationals(n: int) -> SignalRationals:
    """Fit (once) the quotients for `n` effective channels."""
    return SignalRationals(
        shortfall=_quotient(
            lambda z: z * (1.0 - signal.bessel_ratio(z, n)),
            _OF_SHORTFALL,
            2.0 * n,
            starts_at_zero=True,
        ),
        excess=_quotient(
            lambda a: signal.expected_excess(a, n),
            _OF_EXCESS,
            float(np.sqrt(2.0 * n)),
            starts_at_zero=False,
            matters=2.0,
        ),
        information=_quotient(
            lambda a2: signal.information(np.sqrt(a2), n),
            _OF_INFORMATION,
            2.0 * n,
            starts_at_zero=True,
        ),
    )


def _quotient(
    function: Callable[[Array], Array],
    degree: int,
    scale: float,
    *,
    starts_at_zero: bool,
    matters: float = 0.0,
) -> Array32:
    """Fit ``p(x) / q(x)`` on x from 0 to infinity, in ``u = x / (x + scale)``.

    The linearised equations ``p - y q = 0`` are solved with the last denominator as weight, and
    points of large error gain weight from round to round, which levels the error out: the error
    times ``1 + matters x``.
    """
    u = 0.5 * (1.0 - np.cos(np.pi * (np.arange(_NODES) + 0.5) / _NODES))
    u = u[u < _CLOSEST_TO_INFINITY]
    x = scale * u / (1.0 - u)
    y = function(x)
    cost = 1.0 + matters * x
    basis = chebyshev.chebvander(2.0 * u - 1.0, degree)
    above = basis[:, :degree] * u[:, None] if starts_at_zero else basis
    below = np.ones_like(u)
    weight = np.ones_like(u)
    best: Array = np.zeros(0)
    least = np.inf
    for _ in range(_ROUNDS):
        share = cost * np.sqrt(weight) / np.abs(below)
        left = np.hstack([above * share[:, None], -(y * share)[:, None] * basis[:, 1:]])
        found = np.linalg.lstsq(left, y * share, rcond=None)[0]
        below = basis @ np.append(1.0, found[above.shape[1] :])
        error = cost * np.abs(above @ found[: above.shape[1]] / below - y)
        if error.max() < least:
            best, least = np.asarray(found, dtype=np.float64), error.max()
        weight = weight * (error / error.max() + 1e-3) ** 0.5
        weight = weight / weight.mean()
    numerator = _in_x(best[: above.shape[1]], degree, times_u=starts_at_zero)
    denominator = _in_x(np.append(1.0, best[above.shape[1] :]), degree, times_u=False)
    together = np.stack([numerator, denominator]) / denominator[0]
    together = together / scale ** np.arange(degree + 1)
    return np.asarray(together[:, ::-1], dtype=np.float32)


def _in_x(in_u: Array, degree: int, *, times_u: bool) -> Array:
    """From Chebyshev coefficients over u to powers of x: ``p(u) (x + 1)^degree``."""
    powers = np.zeros(1)
    for k, c in enumerate(chebyshev.cheb2poly(in_u)):
        # (2u - 1)^k = ((x - 1) / (x + 1))^k
        term = np.array([c])
        for _ in range(k):
            term = polynomial.polymul(term, [-1.0, 1.0])
        for _ in range(degree - k - (1 if times_u else 0)):
            term = polynomial.polymul(term, [1.0, 1.0])
        powers = polynomial.polyadd(powers, term)
    return np.asarray(polynomial.polymul(powers, [0.0, 1.0]) if times_u else powers)
