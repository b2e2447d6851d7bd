"""How the amplitude of a voxel depends on echo time: one class a signal model.

The engine (`liverfe.fit.engine`) takes any of them. A signal model is a named tuple of arrays,
which compiled code can hold, and two compiled functions that numba picks by its type: the
logarithm of the amplitude at an echo, and its derivative by each parameter. To add one: a class, a
maker, the two functions, a line in `SignalModel`; the engine stays as it is. Own parameters of nil
must give one exponential: the engine climbs that first.

Parameters 0 and 1 are always ln S0 (in sigma) and R2* (1/ms); a model's own come after them.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numba.extending import overload
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.float64]

_DARKEST = 1e-9
"""Amplitude of fat and water together, over their sum, that counts as none."""


class LogLinearDecay(NamedTuple):
    """``ln A(TE) = sum over k of p[k] design[k, TE]``: a decay, alone or bent by a shape.

    Attributes
    ----------
    design : ndarray of float64, shape (P, E)
        Ones, minus echo time (ms), and the shape if there is one.
    lower, upper : ndarray of float64, shape (P,)
        Bounds of the parameters.
    starts : ndarray of float64, shape (K, P - 2)
        Values of the model's own parameters from which the engine climbs.
    """

    design: Array
    lower: Array
    upper: Array
    starts: Array


class FatWaterDecay(NamedTuple):
    """``A(TE) = S0 exp(-R2* TE) |1 - f + f c(TE)|``: fat and water with a common R2*.

    Attributes
    ----------
    times_ms : ndarray of float64, shape (E,)
        Echo times in ms.
    real, imaginary : ndarray of float64, shape (E,)
        The phasor c of fat against water at each echo.
    lower, upper, starts
        As in `LogLinearDecay`; the third parameter is the fat fraction f, 0 to 1.
    """

    times_ms: Array
    real: Array
    imaginary: Array
    lower: Array
    upper: Array
    starts: Array


SignalModel = LogLinearDecay | FatWaterDecay

_MAX_RATE_TIMES_FIRST_ECHO = 12.0
"""Upper bound of R2*: at this multiple of 1 / TE1 a signal of any scanner is gone at TE1."""
_FAT_STARTS = (0.05, 0.3, 0.7, 0.95)
"""The likelihood of a magnitude has one maximum where water is more and one where fat is (Bray
2023), so the engine climbs from both sides."""


def max_rate_per_ms(echo_times_ms: ArrayLike) -> float:
    """Upper bound of R2* in every fit, 1/ms."""
    return _MAX_RATE_TIMES_FIRST_ECHO / float(np.asarray(echo_times_ms)[0])


def mono_exponential(echo_times_ms: ArrayLike) -> LogLinearDecay:
    """``A = S0 exp(-R2* TE)``, the signal model of the house.

    Parameters
    ----------
    echo_times_ms : array_like, shape (E,)
        Echo times in ms.

    Returns
    -------
    LogLinearDecay
        With parameters ln S0 and R2*.
    """
    t = np.asarray(echo_times_ms, dtype=np.float64)
    lower, upper = _bounds(t, ())
    design = np.stack([np.ones_like(t), -t])
    return LogLinearDecay(design=design, lower=lower, upper=upper, starts=np.zeros((1, 0)))


def shaped_decay(echo_times_ms: ArrayLike, shape: ArrayLike) -> LogLinearDecay:
    """``A = S0 exp(-R2* TE + c shape(TE))``: a decay with one more freedom of given shape.

    Alternating signs make a readout of two polarities, squares of echo times the dephasing in a
    field gradient, a single one an echo that stands apart.

    Parameters
    ----------
    echo_times_ms : array_like, shape (E,)
        Echo times in ms.
    shape : array_like, shape (E,)
        The shape; c may have either sign.

    Returns
    -------
    LogLinearDecay
        With parameters ln S0, R2* and c.
    """
    t = np.asarray(echo_times_ms, dtype=np.float64)
    g = np.asarray(shape, dtype=np.float64)
    lower, upper = _bounds(t, ((-np.inf, np.inf),))
    design = np.stack([np.ones_like(t), -t, g])
    return LogLinearDecay(design=design, lower=lower, upper=upper, starts=np.zeros((1, 1)))


def fat_water_decay(echo_times_ms: ArrayLike, fat_phasor: ArrayLike) -> FatWaterDecay:
    """``A = S0 exp(-R2* TE) |1 - f + f c(TE)|``: fat of a known spectrum beside water.

    Parameters
    ----------
    echo_times_ms : array_like, shape (E,)
        Echo times in ms.
    fat_phasor : array_like of complex, shape (E,)
        Sum of the fat peaks' amplitudes times their phasors, 1 at echo time zero.

    Returns
    -------
    FatWaterDecay
        With parameters ln S0, R2* and the fat fraction.
    """
    t = np.asarray(echo_times_ms, dtype=np.float64)
    c = np.asarray(fat_phasor, dtype=np.complex128)
    lower, upper = _bounds(t, ((0.0, 1.0),))
    return FatWaterDecay(
        times_ms=t, real=np.ascontiguousarray(c.real), imaginary=np.ascontiguousarray(c.imag),
        lower=lower, upper=upper, starts=np.array(_FAT_STARTS)[:, None],
    )  # fmt: skip


def echo_times_of(model: SignalModel) -> Array:
    """Echo times in ms, shape (E,)."""
    if isinstance(model, FatWaterDecay):
        return model.times_ms
    return np.asarray(-model.design[1])


def _bounds(t: Array, own: tuple[tuple[float, float], ...]) -> tuple[Array, Array]:
    pairs = ((-np.inf, np.inf), (0.0, max_rate_per_ms(t)), *own)
    return np.array([low for low, _ in pairs]), np.array([high for _, high in pairs])


def log_amplitude(model: SignalModel, work: Array, row: int, e: int) -> float:
    """ln A in sigma at echo `e` for the parameters in a row of `work`, for compiled code."""
    raise NotImplementedError(f"only compiled code asks {type(model).__name__}")


def fill_slopes(model: SignalModel, work: Array, row: int, e: int, out: int) -> None:
    """Derivatives of ln A at echo `e`, into row `out` of `work`, for compiled code."""
    raise NotImplementedError(f"only compiled code asks {type(model).__name__}")


def _is(kind: Any, of: type) -> bool:
    return getattr(kind, "instance_class", None) is of


@overload(log_amplitude)
def _log_amplitude(model: Any, work: Any, row: Any, e: Any) -> Any:
    if _is(model, LogLinearDecay):

        def linear(model: Any, work: Any, row: Any, e: Any) -> Any:
            total = 0.0
            for k in range(len(model.design)):
                total += work[row, k] * model.design[k, e]
            return total

        return linear
    if _is(model, FatWaterDecay):

        def fat_water(model: Any, work: Any, row: Any, e: Any) -> Any:
            fat = work[row, 2]
            x, y = 1.0 - fat + fat * model.real[e], fat * model.imaginary[e]
            size = max(x * x + y * y, _DARKEST * _DARKEST)
            return work[row, 0] - work[row, 1] * model.times_ms[e] + 0.5 * np.log(size)

        return fat_water
    return None


@overload(fill_slopes)
def _fill_slopes(model: Any, work: Any, row: Any, e: Any, out: Any) -> Any:
    if _is(model, LogLinearDecay):

        def linear(model: Any, work: Any, row: Any, e: Any, out: Any) -> Any:
            for k in range(len(model.design)):
                work[out, k] = model.design[k, e]

        return linear
    if _is(model, FatWaterDecay):

        def fat_water(model: Any, work: Any, row: Any, e: Any, out: Any) -> Any:
            fat = work[row, 2]
            x, y = 1.0 - fat + fat * model.real[e], fat * model.imaginary[e]
            size = max(x * x + y * y, _DARKEST * _DARKEST)
            work[out, 0], work[out, 1] = 1.0, -model.times_ms[e]
            work[out, 2] = (x * (model.real[e] - 1.0) + y * model.imaginary[e]) / size

        return fat_water
    return None
