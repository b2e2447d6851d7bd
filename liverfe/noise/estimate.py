"""The rule that chooses between the ways of knowing the noise, and cross-checks them."""

from __future__ import annotations

from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.noise.air import sigma_from_air
from liverfe.noise.ceiling import sigma_ceiling
from liverfe.noise.level import NoiseCandidate, NoiseLevel
from liverfe.noise.residual import sigma_from_residuals

_AGREE = 0.10
"""Air and residuals agree if their sigmas differ by less than this share."""

_SCALE_TREND_PER_S = 5.0
"""Noise that grows faster with echo time than this is told: it takes as much off every R2*. True
noise shows less than 1 /s of it (the test for falling signal thins one side)."""


def estimate_noise(
    stack: EchoStack,
    *,
    method: str = "auto",
    sigma: float | None = None,
    n_channels: int | None = None,
) -> NoiseLevel:
    """Find the noise level of a stack.

    Both ways are always tried. Where they agree within 10 % air is taken, being the more precise;
    where they differ the residuals are taken, because they come from tissue and the air may be
    filtered, scaled or from another part of a parallel reconstruction. Only air can tell the
    number of channels. Where neither is open, an upper bound of sigma stands in (`sigma_ceiling`):
    limits then come out low, and `liverfe.study` refuses what the bound could move.

    Parameters
    ----------
    stack : EchoStack
        Magnitudes in true values.
    method : {'auto', 'air', 'residual', 'given'}
        ``auto`` is the rule above; the others force one way.
    sigma : float or None
        The noise SD per channel for ``given``, signal units.
    n_channels : int or None
        Effective number of channels if known.

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
    residual = sigma_from_residuals(
        stack, start_sigma=air.sigma, n_channels=n_channels or air.n_channels
    )
    tried = [air, residual]
    chosen = _choose(method, air, residual)
    findings = []
    if chosen is None and method == "auto":
        ceiling = sigma_ceiling(stack)
        tried.append(ceiling)
        if ceiling.sigma is not None:
            chosen = ceiling
            findings.append(Finding.of("noise-ceiling", reasons=_reasons(air, residual)))
    if chosen is None:
        raise StudyRefused(Finding.of("noise-unknown", reasons=_reasons(*tried)))
    if air.echo_scale_trend_per_s > _SCALE_TREND_PER_S:
        shift = f"{air.echo_scale_trend_per_s:.0f}"
        findings.append(Finding.of("echo-scale-differs", shift=shift))
    if air.added_constant > 0.0:
        findings.append(Finding.of("background-offset", constant=f"{air.added_constant:.3g}"))
    if air.is_clipped:
        findings.append(Finding.of("background-clipped"))
    if air.sigma is None and n_channels is None:
        findings.append(Finding.of("channels-not-tested"))
    return _level(chosen, tuple(tried), tuple(findings))


def _reasons(*closed: NoiseCandidate) -> str:
    return "; ".join(f"{candidate.method}: {candidate.remark}" for candidate in closed)


def _choose(method: str, air: NoiseCandidate, residual: NoiseCandidate) -> NoiseCandidate | None:
    wanted = {"air": (air,), "residual": (residual,), "auto": (air, residual)}[method]
    usable = [candidate for candidate in wanted if candidate.sigma is not None]
    if len(usable) < 2:
        return usable[0] if usable else None
    assert air.sigma is not None
    assert residual.sigma is not None
    agree = abs(residual.sigma / air.sigma - 1.0) <= _AGREE
    return air if agree else residual


def _level(
    chosen: NoiseCandidate,
    candidates: tuple[NoiseCandidate, ...],
    findings: tuple[Finding, ...] = (),
) -> NoiseLevel:
    assert chosen.sigma is not None
    return NoiseLevel(
        sigma=chosen.sigma,
        n_channels=chosen.n_channels,
        method=chosen.method,
        relative_sd=chosen.relative_sd or 0.0,
        candidates=candidates,
        findings=findings,
    )
