"""What is left of a region's signal when each voxel's own decay is taken off, pooled by echo.

Voxel by voxel, not on the mean signal: iron that differs between voxels bends the mean curve
although each voxel decays with one exponential. Residuals ``z = (m - E[m]) / SD[m]`` are projected
off the two directions that S0 and R2* of the voxel explain, so that what remains does not depend on
how well the voxel was fitted; its sum over voxels has mean zero if the model holds, and the
projection times the number of voxels for its covariance.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from liverfe.fit import fit_rows
from liverfe.regions.doubts.sample import Sample
from liverfe.regions.magnitudes import Magnitudes, magnitudes

Array = NDArray[np.float64]

_FARTHEST = 6.0
"""A residual counts up to this many standard deviations: one bad voxel must not speak for all."""
_SEEN = 0.25
"""A direction of which less than this share is left after the projection says nothing."""
_SMALL = 0.01
"""Echoes that are all off by less than this share of their signal cannot move R2* by 2 %, or only
where it is so slow that 2 % of it is nothing."""
_BIAS_SHARE = 0.5
"""Share of the second-order bias of the residuals that is taken for its own uncertainty."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Misfit:
    """Residuals of V voxels that have a decay.

    Attributes
    ----------
    rate_per_s : ndarray of float64, shape (V,)
        R2* in 1/s.
    a : ndarray of float64, shape (V, E)
        Amplitude of the fit, in sigma.
    level : Magnitudes
        Moments at `a`.
    kept : ndarray of bool
        Which voxels of the sample these are.
    z : ndarray of float64, shape (V, E)
        Standardised residuals, projected.
    share : ndarray of float64, shape (V, E)
        Variance of `z` if the model holds and sigma is right.
    pulls : ndarray of float64, shape (E,)
        Sum of `z` over voxels, its bias taken off.
    basis : ndarray of float64, shape (E, D)
        Directions in which the pulls say something.
    noise, nuisance : ndarray of float64, shape (D, D)
        Covariance of the pulls along `basis`: from noise if sigma is right, the correlation of
        voxels counted in; and from the error of sigma and of the bias.
    response : ndarray of float64, shape (E, E)
        Pulls that a change of ln A in each echo gives, the same in all voxels.
    """

    rate_per_s: Array
    a: Array
    level: Magnitudes
    kept: NDArray[np.bool_]
    z: Array
    share: Array
    pulls: Array
    basis: Array
    noise: Array
    nuisance: Array
    response: Array
    _tangents: tuple[Array, Array]

    @property
    def median_rate_per_s(self) -> float:
        """Median R2* of the voxels, in 1/s."""
        return float(np.median(self.rate_per_s))

    def covariance(self, scatter: float) -> Array:
        """Covariance of the pulls along `basis` if noise has `scatter` times its variance."""
        return scatter * self.noise + self.nuisance

    def strain(self, scatter: float | None = None) -> float:
        """How far the pulls are from zero: chi-square with as many degrees as `basis` has.

        Parameters
        ----------
        scatter : float or None
            Variance of the noise as a share of what sigma says; None: as it was found.
        """
        along = self.basis.T @ self.pulls
        covariance = self.covariance(max(self.scatter, 0.1) if scatter is None else scatter)
        return float(along @ np.linalg.solve(covariance, along))

    @property
    def is_small(self) -> bool:
        """Whether no echo is off by as much as could move R2* by something to tell."""
        response = np.maximum(np.diag(self.response), 1e-9)
        return bool((np.abs(self.pulls) < _SMALL * response).all())

    def pooled(self, change: Array) -> Array:
        """Pulls that a change of the expected magnitudes (sigma) would give; shape (E,)."""
        return np.asarray(_off(change / self.level.sd, self._tangents).sum(axis=0))

    @property
    def scatter(self) -> float:
        """Mean square of the residuals, 1 if the model holds and sigma is right."""
        return float((self.z**2).sum() / max(self.share.sum(), 1.0))


def misfit(sample: Sample, m: Array | None = None, echo_times_ms: Array | None = None) -> Misfit:
    """Fit each voxel of a sample and pool the residuals.

    Parameters
    ----------
    sample : Sample
        The voxels.
    m : ndarray of float64, shape (V, E), or None
        Other magnitudes for them, as when a distortion was taken out.
    echo_times_ms : ndarray of float64, shape (E,), or None
        Other echo times for them.

    Returns
    -------
    Misfit
        Of the voxels that have a decay at all.
    """
    m = sample.m if m is None else m
    times = (sample.echo_times_ms if echo_times_ms is None else echo_times_ms) * 1e-3
    n = sample.n_channels
    rows = fit_rows(m.astype(np.float32), times * 1e3, np.ones(1), n)
    kept = np.isfinite(rows.r2star_per_s) & np.isfinite(rows.s0) & (rows.s0 > 0)
    rate, s0 = rows.r2star_per_s[kept].astype(np.float64), rows.s0[kept].astype(np.float64)
    a = s0[:, None] * np.exp(-rate[:, None] * times)
    level = magnitudes(a, n)
    slope = level.slope / level.sd
    one = slope / np.linalg.norm(slope, axis=1, keepdims=True)
    steep = slope * times
    steep = steep - one * (one * steep).sum(axis=1, keepdims=True)
    length = np.linalg.norm(steep, axis=1, keepdims=True)
    other = steep / np.maximum(length, 1e-12)
    tangents = (one, other)
    z = np.clip((m[kept] - level.mean) / level.sd, -_FARTHEST, _FARTHEST)
    z = _off(z, tangents)
    gram = np.eye(len(times)) * len(z) - one.T @ one - other.T @ other
    values, vectors = np.linalg.eigh(gram)
    basis = vectors[:, values > _SEEN * max(len(z), 1)]
    # Curvature of the decay: half the variance of ln A in each echo times the bend of the mean.
    wobble = (one**2 + other**2) / np.maximum(slope, 1e-9) ** 2
    bias = -0.5 * _off(np.minimum(wobble, 1.0) * level.bend / level.sd, tangents).sum(axis=0)
    floor = _off((level.mean - level.slope) / level.sd, tangents).sum(axis=0)
    response = np.diag(slope.sum(axis=0)) - one.T @ (one * slope) - other.T @ (other * slope)
    unsure = np.stack([_BIAS_SHARE * bias, sample.sigma_sd * floor]) @ basis
    return Misfit(
        rate_per_s=rate, a=a, level=level, kept=kept, z=z, share=1.0 - one**2 - other**2,
        pulls=z.sum(axis=0) - bias, basis=basis,
        noise=sample.inflation * (basis.T @ gram @ basis), nuisance=unsure.T @ unsure,
        response=response, _tangents=tangents,
    )  # fmt: skip


def _off(values: Array, tangents: tuple[Array, Array]) -> Array:
    """Take off what S0 and R2* of each voxel explain."""
    for tangent in tangents:
        values = values - tangent * (values * tangent).sum(axis=1, keepdims=True)
    return values
