"""Tables of the signal equations, for kernels that cannot call SciPy.

Each function is stored as cubic pieces over ``u = x / (x + scale)``, which maps 0 ... infinity to
0 ... 1 and in which all of them are smooth up to the end. Piecewise cubics on 256 intervals keep
the error below 1e-8 (checked against SciPy in the tests): 1e-6 of a standard error.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from liverfe.fit import signal

N_INTERVALS = 256

Array = NDArray[np.float64]


RATIO, KERNEL, EXCESS, INFORMATION = range(4)
"""Places of the tables in `KernelTables.pieces`."""


class KernelTables(NamedTuple):
    """What compiled code takes of `SignalTables`: in one array, which compiles sooner than four.

    Attributes
    ----------
    n : int
        Effective number of channels.
    pieces : ndarray of float64, shape (4, N, 4)
        Ratio, kernel, excess and information.
    product_scale, amplitude_scale : float
        As in `SignalTables`.
    """

    n: int
    pieces: NDArray[np.float64]
    product_scale: float
    amplitude_scale: float


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class SignalTables:
    """Cubic pieces of the signal equations for one number of channels.

    Attributes
    ----------
    n : int
        Effective number of channels.
    ratio : ndarray of float64, shape (N, 4)
        `signal.bessel_ratio` over z = m a.
    kernel : ndarray of float64, shape (N, 4)
        `signal.log_likelihood_kernel` plus ``(n - 1/2) ln(z + product_scale)`` over z.
    excess : ndarray of float64, shape (N, 4)
        `signal.expected_excess` over a.
    slope : ndarray of float64, shape (N, 4)
        `signal.expected_slope` over a.
    information : ndarray of float64, shape (N, 4)
        `signal.information` over a.
    product_scale, amplitude_scale : float
        The scales of u for z and for a.
    """

    n: int
    ratio: Array
    kernel: Array
    excess: Array
    slope: Array
    information: Array
    product_scale: float
    amplitude_scale: float

    def for_kernels(self) -> KernelTables:
        """What the kernels of maximum likelihood take, as compiled code can hold it."""
        return KernelTables(
            n=self.n,
            pieces=np.stack([self.ratio, self.kernel, self.excess, self.information]),
            product_scale=self.product_scale,
            amplitude_scale=self.amplitude_scale,
        )


@lru_cache(maxsize=8)
def signal_tables(n: int) -> SignalTables:
    """Make (once) the tables for `n` effective channels."""
    product_scale = n + 1.0
    amplitude_scale = 1.0 + float(np.sqrt(2.0 * n))

    def kernel(z: Array) -> Array:
        return signal.log_likelihood_kernel(z, n) + (n - 0.5) * np.log(z + product_scale)

    return SignalTables(
        n=n,
        ratio=_pieces(lambda z: signal.bessel_ratio(z, n), product_scale, 1.0),
        kernel=_pieces(kernel, product_scale, -0.5 * float(np.log(2.0 * np.pi))),
        excess=_pieces(lambda a: signal.expected_excess(a, n), amplitude_scale, 0.0),
        slope=_pieces(lambda a: signal.expected_slope(a, n), amplitude_scale, 1.0),
        information=_pieces(lambda a: signal.information(a, n), amplitude_scale, 1.0),
        product_scale=product_scale,
        amplitude_scale=amplitude_scale,
    )


def _pieces(function: Callable[[Array], Array], scale: float, at_infinity: float) -> Array:
    """Cubic Hermite pieces of `function` over u, slopes by fourth-order differences."""
    u = np.linspace(0.0, 1.0, N_INTERVALS + 1)
    inner = u[:-1]
    value = np.append(function(scale * inner / (1.0 - inner)), at_infinity)
    slope = np.empty_like(value)  # per interval
    slope[2:-2] = (value[:-4] - 8.0 * value[1:-3] + 8.0 * value[3:-1] - value[4:]) / 12.0
    for k, step in ((0, 1), (-1, -1)):
        v = value[::step][:6]
        slope[k] = step * (-25 * v[0] + 48 * v[1] - 36 * v[2] + 16 * v[3] - 3 * v[4]) / 12.0
        slope[k + step] = step * (-3 * v[0] - 10 * v[1] + 18 * v[2] - 6 * v[3] + v[4]) / 12.0
    rise = value[1:] - value[:-1]
    left, right = slope[:-1], slope[1:]
    return np.stack(
        [value[:-1], left, 3.0 * rise - 2.0 * left - right, left + right - 2.0 * rise], axis=1
    )


def look_up(pieces: Array, u: Array) -> Array:
    """Evaluate cubic pieces at `u` (0 to 1), for whole arrays outside the kernels."""
    x = np.asarray(u) * len(pieces)
    i = np.minimum(x.astype(np.intp), len(pieces) - 1)
    t = x - i
    c = pieces[i]
    return np.asarray(c[..., 0] + t * (c[..., 1] + t * (c[..., 2] + t * c[..., 3])))
