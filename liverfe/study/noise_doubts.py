"""How much what is not known of the noise could move the headline: doubt with its effect."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import fit_rows
from liverfe.noise import NoiseLevel
from liverfe.regions import RegionSummary

_MATTERS = 0.05
"""A shift of R2* by this share is told as a caution: it could move a LIC across a decision."""
_DECIDES = 0.50
"""A shift by this share leaves nothing to state."""
_MOST_WITHOUT_SIGN = 16
"""More effective channels than these are tried only where the tissue shows more than one: coils far
from the liver add none there."""
_AGREE = 0.10
"""Sigmas within this share of each other agree, as in `liverfe.noise`."""
_NEXT_TO_NONE = 0.05
"""Share of a bounded sigma that stands for no noise at all."""
_MOST_VOXELS = 4000


def noise_findings(
    summary: RegionSummary, stack: EchoStack, noise: NoiseLevel
) -> tuple[Finding, ...]:
    """Fit the region again under what else the noise could be, and tell what moves.

    Parameters
    ----------
    summary : RegionSummary
        The headline region.
    stack, noise
        Images and the noise level that was used.

    Returns
    -------
    tuple of Finding
        ``noise-disagrees`` or ``noise-cross-check``; ``channels-matter``; or nothing.

    Raises
    ------
    StudyRefused
        ``channels-decide``, if R2* hangs on the unknown number of channels.
    """
    sigmas = {c.method: c.sigma for c in noise.candidates if c.sigma is not None}
    found: list[Finding] = []
    if {"air", "residual"} <= sigmas.keys():
        air, residual = sigmas["air"], sigmas["residual"]
        if abs(residual / air - 1.0) > _AGREE:
            other = air if noise.method == "residual" else residual
            shift = _shift(summary, stack, noise, sigma=other, n=noise.n_channels)
            told = {"air": f"{air:.4g}", "residual": f"{residual:.4g}"}
            if abs(shift) > _MATTERS:
                found.append(
                    Finding.of(
                        "noise-disagrees", region=summary.name, shift=f"{100 * shift:+.0f}", **told
                    )
                )
            else:
                found.append(Finding.of("noise-cross-check", **told))
    if noise.channels_between is not None:
        shift, other = max(
            (
                (_shift(summary, stack, noise, sigma=noise.sigma, n=n), n)
                for n in _other_channels(noise)
            ),
            key=lambda tried: abs(tried[0]),
        )
        facts = {
            "region": summary.name,
            "assumed": noise.n_channels,
            "other": other,
            "shift": f"{100 * shift:+.0f}",
        }
        if abs(shift) > _DECIDES and summary.r2star.qualifier == "=":
            raise StudyRefused(Finding.of("channels-decide", **facts))
        if abs(shift) > _MATTERS:
            found.append(Finding.of("channels-matter", **facts))
    return tuple(found)


def _other_channels(noise: NoiseLevel) -> tuple[int, ...]:
    """Both ends of the range that is open; nobody expects very many channels without a sign."""
    assert noise.channels_between is not None
    fewest, most = noise.channels_between
    if noise.n_channels == 1:
        return (min(most, _MOST_WITHOUT_SIGN),)
    return tuple(n for n in (fewest, most) if n != noise.n_channels)


def refuse_unbounded(
    summaries: Sequence[RegionSummary], stack: EchoStack, noise: NoiseLevel
) -> None:
    """Refuse a study whose sigma is only bounded from above, where the bound could move a value.

    Parameters
    ----------
    summaries : sequence of RegionSummary
        All regions; one over its limit is over it for any smaller sigma's limit as stated.
    stack, noise
        Images and the noise level that was used.

    Raises
    ------
    StudyRefused
        ``noise-unknown``, if a measured R2* would be 5 % different without noise.
    """
    if noise.method != "ceiling":
        return
    for summary in summaries:
        if summary.r2star.qualifier != "=" or summary.organ == "background":
            continue
        shift = _shift(summary, stack, noise, sigma=_NEXT_TO_NONE * noise.sigma, n=noise.n_channels)
        if abs(shift) > _MATTERS:
            reasons = "; ".join(f"{c.method}: {c.remark}" for c in noise.candidates)
            raise StudyRefused(Finding.of("noise-unknown", reasons=reasons))


def _shift(
    summary: RegionSummary, stack: EchoStack, noise: NoiseLevel, *, sigma: float, n: int
) -> float:
    """Relative change of the region's median R2* under another sigma or channel count.

    A region over its limit is compared over all its voxels: a change that brings them within
    reach, or out of it, counts in full.
    """
    mask = summary.used if summary.r2star.qualifier == "=" else summary.mask
    every = max(1, int(mask.sum()) // _MOST_VOXELS)
    signal = stack.magnitude[mask][::every]
    place = np.ones(1) if noise.sigma_map is None else noise.sigma_map[mask][::every] / noise.sigma

    def median(trial_sigma: float, trial_n: int) -> float:
        rows = fit_rows(signal, stack.echo_times_ms, trial_sigma * place.astype(float), trial_n)
        fast = np.where(np.isfinite(rows.r2star_per_s), rows.r2star_per_s, np.inf)
        return float(np.median(fast))

    here, there = median(noise.sigma, noise.n_channels), median(sigma, n)
    if not np.isfinite(here) or not here > 0:
        return 0.0 if not np.isfinite(there) else 1.0
    return there / here - 1.0 if np.isfinite(there) else 1.0
