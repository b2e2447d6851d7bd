"""The rule that chooses between the ways of knowing the noise, and cross-checks them."""

from __future__ import annotations

import numpy as np

from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.noise.air import sigma_from_air
from liverfe.noise.ceiling import sigma_ceiling
from liverfe.noise.joint import DecayLikelihood
from liverfe.noise.level import NoiseCandidate, NoiseLevel
from liverfe.noise.residual import residual_candidate
from liverfe.noise.tissue import Tissue
from liverfe.noise.variation import Variation

_TISSUE_LOWER, _TISSUE_HIGHER = 0.015, 0.04
"""Air and tissue agree if the sigma of the tissue is lower or higher by less than these shares. The
lower of two is nearer the truth: ghosts, and the ringing of sharp edges (8 % where noise is low),
only ever add to air; fat and borders only ever add to the residuals."""
_BY_CHANCE = 4.0
_THE_SAME = 0.03
"""Whole air whose sigma is the tissue's to this share lies in the same noise: its number of
channels, known to a few percent, is given up only where dark echoes are very sure."""
_DIFFER = 0.10
"""Beyond this share a third witness is heard."""

_ROUNDS = 4
_UNTOLD = (1, 8)
"""What is considered where tissue tells nothing either: up to a middling sum of squares."""

_SCALE_TREND_PER_S = 5.0
"""Noise that grows faster with echo time than this is told: it takes as much off every R2*. True
noise shows less than 1 /s of it (the test for falling signal thins one side)."""


def estimate_noise(
    stack: EchoStack,
    *,
    method: str = "auto",
    sigma: float | None = None,
    n_channels: int | None = None,
    likelihood: DecayLikelihood | None = None,
) -> NoiseLevel:
    """Find the noise level of a stack.

    Air and residuals are always tried. Where they agree within a few percent, and the tissue allows
    the channels of the air, air is taken, being the more precise. Where not, the tissue decides,
    being where the measurement is, while the air may be filtered, scaled or from another part of a
    parallel reconstruction: sigma, by a map where it varies over the image, and the channels by
    the air if that agrees once the map is taken out, else by the dark echoes of the tissue. Where
    no echo is bright enough for residuals, the joint likelihood stands in; where that is closed
    too, an upper bound of sigma (`sigma_ceiling`): limits then come out low, and `liverfe.study`
    refuses what the bound could move.

    Parameters
    ----------
    stack : EchoStack
        Magnitudes in true values.
    method : {'auto', 'air', 'residual', 'joint', 'given'}
        ``auto`` is the rule above; the others force one way.
    sigma : float or None
        The noise SD per channel for ``given``, signal units.
    n_channels : int or None
        Effective number of channels if known.
    likelihood : DecayLikelihood or None
        How well decays fit, for the joint likelihood; None closes that way.

    Returns
    -------
    NoiseLevel
        With every candidate and how they compare.

    Raises
    ------
    StudyRefused
        ``noise-unknown``: no way is open.
    """
    if method == "given":
        if sigma is None:
            raise ValueError("method 'given' needs sigma")
        given = NoiseCandidate(
            method="given", sigma=sigma, n_channels=n_channels or 1, relative_sd=0.0, n_voxels=0,
            remark="given by the method file",
        )  # fmt: skip
        return _level(given, (given,))
    air = sigma_from_air(stack, n_channels=n_channels)
    tissue = Tissue.of(stack, likelihood=likelihood, start_sigma=air.sigma)
    doubts = _doubts_of_air(air)
    residual = _residual(tissue, n_channels or air.n_channels)
    agree = not air.is_partial and _agree(air, residual, tissue)
    if method == "air" or (method == "auto" and agree):
        if air.sigma is None:
            raise StudyRefused(Finding.of("noise-unknown", reasons=_reasons(air)))
        return _level(air, (air, residual), doubts)
    return _from_tissue(stack, air, tissue, method, n_channels, doubts)


def _agree(air: NoiseCandidate, residual: NoiseCandidate, tissue: Tissue) -> bool:
    """Whether the tissue says nothing against the air."""
    if air.sigma is None:
        return False
    if residual.sigma is None:
        return not air.is_partial
    apart = residual.sigma / air.sigma - 1.0
    if not air.is_partial and abs(apart) <= _THE_SAME:
        return tissue.allows(air.n_channels, at_odds=True)
    lower = max(_TISSUE_LOWER, _BY_CHANCE * tissue.residuals(air.n_channels).scatter)
    agree = -lower <= apart <= _TISSUE_HIGHER
    return agree and tissue.allows(air.n_channels)


def _differ(air: NoiseCandidate, residual: NoiseCandidate) -> bool:
    if air.sigma is None or residual.sigma is None:
        return False
    return abs(residual.sigma / air.sigma - 1.0) > _DIFFER


def _from_tissue(
    stack: EchoStack,
    air: NoiseCandidate,
    tissue: Tissue,
    method: str,
    n_channels: int | None,
    doubts: tuple[Finding, ...],
) -> NoiseLevel:
    """Sigma where the tissue is, as a map where it varies; channels by whoever can tell them."""
    raw, flat_air, between = tissue, air, None
    n = n_channels or air.n_channels
    for _ in range(_ROUNDS):  # the map hangs on the channels, and what tells them on the map
        tried_n, variation = n, raw.variation(n, stack.grid.shape)
        tissue, air = raw, flat_air
        if variation is not None:
            tissue = raw.in_units_of(variation.relative_sigma)
            air = sigma_from_air(
                stack, n_channels=n_channels, relative_sigma=variation.relative_sigma
            )
        n, between = _channels(air, tissue, n_channels, by_likelihood=method == "joint")
        if n == tried_n:
            break
    if variation is not None:
        doubts += (Finding.of("noise-varies", span=f"{variation.span:.1f}"),)
    if between is not None:
        facts = {"assumed": n, "fewest": between[0], "most": between[1]}
        doubts += (Finding.of("channels-not-tested", **facts),)
    residual = _residual(tissue, n)
    tried = [air, residual]
    if method == "joint" or residual.sigma is None or _differ(air, residual):
        tried.append(tissue.joint(n))
    order = {"auto": ("residual", "joint", "air"), "residual": ("residual",), "joint": ("joint",)}
    usable = {way.method: way for way in tried if way.sigma is not None}
    chosen = next((usable[name] for name in order[method] if name in usable), None)
    if chosen is None and method == "auto":
        ceiling = sigma_ceiling(stack)
        tried.append(ceiling)
        if ceiling.sigma is not None:
            chosen = ceiling
            doubts += (Finding.of("noise-ceiling", reasons=_reasons(air, residual)),)
    if chosen is None:
        raise StudyRefused(Finding.of("noise-unknown", reasons=_reasons(*tried)))
    return _level(chosen, tuple(tried), doubts, variation=variation, between=between)


def _channels(
    air: NoiseCandidate, tissue: Tissue, n_channels: int | None, *, by_likelihood: bool
) -> tuple[int, tuple[int, int] | None]:
    """The number of channels, and between which it lies if it is not known."""
    if n_channels is not None:
        return n_channels, None
    believed = air.sigma is not None and tissue.allows(air.n_channels)
    agree = believed and _agree(air, _residual(tissue, air.n_channels), tissue)
    if agree and not air.is_partial:
        return air.n_channels, None
    # Tissue among the air, or air of another reconstruction: dark echoes of the liver come first.
    shown = tissue.channels(by_likelihood=by_likelihood)
    if shown is not None and shown.are_told:
        return shown.n, None
    if agree or (believed and not air.is_partial):
        return air.n_channels, None
    if shown is None:
        return 1, _UNTOLD
    return shown.n, (shown.fewest, shown.most)


def _residual(tissue: Tissue, n_channels: int) -> NoiseCandidate:
    return residual_candidate(tissue.residuals(n_channels), n_channels)


def _doubts_of_air(air: NoiseCandidate) -> tuple[Finding, ...]:
    found = []
    if air.echo_scale_trend_per_s > _SCALE_TREND_PER_S:
        shift = f"{air.echo_scale_trend_per_s:.0f}"
        found.append(Finding.of("echo-scale-differs", shift=shift))
    if air.added_constant > 0.0:
        found.append(Finding.of("background-offset", constant=f"{air.added_constant:.3g}"))
    if air.is_clipped:
        found.append(Finding.of("background-clipped"))
    return tuple(found)


def _reasons(*closed: NoiseCandidate) -> str:
    return "; ".join(f"{candidate.method}: {candidate.remark}" for candidate in closed)


def _level(
    chosen: NoiseCandidate,
    candidates: tuple[NoiseCandidate, ...],
    findings: tuple[Finding, ...] = (),
    *,
    variation: Variation | None = None,
    between: tuple[int, int] | None = None,
) -> NoiseLevel:
    assert chosen.sigma is not None
    return NoiseLevel(
        sigma=chosen.sigma,
        n_channels=chosen.n_channels,
        method=chosen.method,
        relative_sd=max(chosen.relative_sd or 0.0, variation.relative_sd if variation else 0.0),
        candidates=candidates,
        sigma_map=variation.relative_sigma * np.float32(chosen.sigma) if variation else None,
        channels_between=between,
        findings=findings,
    )
