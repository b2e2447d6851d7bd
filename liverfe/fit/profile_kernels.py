"""The compiled loop of `profile_r2star`: for each rate the best S0, by Fisher scoring in ln S0.

Echo times in ms, rates in 1/ms, amplitudes in units of sigma.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.fit.compiled import compiled
from liverfe.fit.likelihood_kernels import AMPLITUDES, USED, M, data_terms, inner, look_up_one
from liverfe.fit.tables import INFORMATION, KERNEL, RATIO, KernelTables

Array = NDArray[np.float64]
Array32 = NDArray[np.float32]

_MAX_STEPS = 30
_STOP = 1e-8
"""A step that can gain less than this in log-likelihood is the last one."""
_LONGEST_STEP = 1.0
"""In ln S0: further the likelihood is not shaped like a parabola."""
_DARKEST_SIGMA = 1e-3
"""S0 is not followed below this many sigma (at the first echo): there it says nothing."""


@inner
def _at(m: Array, decay: Array, log_s0: float, noise: KernelTables) -> tuple[float, float, float]:
    """Log-likelihood, score and information in ln S0."""
    value = score = info = 0.0
    s0 = np.exp(log_s0)
    for e in range(len(m)):
        a = s0 * decay[e]
        z = m[e] * a
        u = z / (z + noise.product_scale)
        value += look_up_one(noise, KERNEL, u) - 0.5 * (a - m[e]) ** 2
        value -= (noise.n - 0.5) * np.log(z + noise.product_scale)
        score += a * (m[e] * look_up_one(noise, RATIO, u) - a)
        info += a * a * look_up_one(noise, INFORMATION, a / (a + noise.amplitude_scale))
    return value, score, info


@compiled(nogil=True, error_model="numpy", no_cfunc_wrapper=True)
def profile_voxels(
    signal: Array32, times: Array, rates: Array, sigma: Array, noise: KernelTables, work: Array,
    out: Array,
) -> None:  # fmt: skip
    """Fill `out` for each voxel and rate; every echo counts."""
    m, decay = work[M], work[AMPLITUDES]
    for e in range(len(times)):
        work[USED, e] = 1.0
    for v in range(len(signal)):
        scale, fine, power = 1.0 / sigma[v % len(sigma)], True, 0.0
        for e in range(len(times)):
            m[e] = signal[v, e] * scale
            power += m[e] * m[e]
            fine = fine and m[e] >= 0.0
        if not fine or not np.isfinite(power):
            continue
        constant = data_terms(work, len(times), sigma[v % len(sigma)], noise.n)
        for k in range(len(rates)):
            above, below = 0.0, 0.0
            for e in range(len(times)):
                decay[e] = np.exp(-rates[k] * times[e])
                # Least squares with the noise power taken off: close enough to climb from.
                corrected = np.sqrt(max(m[e] * m[e] - (2.0 * noise.n - 1.0), 0.0))
                above += corrected * decay[e]
                below += decay[e] * decay[e]
            lowest = np.log(_DARKEST_SIGMA / decay[0])
            log_s0 = max(np.log(max(above, 1e-300) / below), lowest)
            best, score, info = _at(m, decay, log_s0, noise)
            for _ in range(_MAX_STEPS):
                step = min(max(score / info, -_LONGEST_STEP), _LONGEST_STEP)
                if log_s0 + step < lowest:
                    step = lowest - log_s0
                value, next_score, next_info = _at(m, decay, log_s0 + step, noise)
                shortened = 0
                while value < best - _STOP and shortened < 8:
                    step *= 0.5
                    shortened += 1
                    value, next_score, next_info = _at(m, decay, log_s0 + step, noise)
                gain = 0.5 * step * score
                log_s0, best, score, info = log_s0 + step, value, next_score, next_info
                if abs(gain) < _STOP:
                    break
            out[v, k] = best + constant
