"""What a reader is told of a region's voxels: how many are censored, failed, trimmed, or differ."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import EchoStack
from liverfe.errors import Finding
from liverfe.fit import DecayFit, r2star_bound_per_s
from liverfe.noise import NoiseLevel
from liverfe.regions.counts import VoxelCounts, usable_echoes
from liverfe.regions.statistics import censored_quantile
from liverfe.regions.summary import R2StarSummary

Mask = NDArray[np.bool_]

_TOLD_CENSORED = 0.05
"""From this share of voxels over the limit on, a reader is told."""
_TOLD_FAILED = 0.10
_TOLD_TRIMMED = 0.15
_FEW_VOXELS = 30
"""Fewer usable voxels than this are told."""
_UNEVEN = 0.40
"""Spread of R2* within a region, as a share of its median, from which a reader is told; livers of
one kind spread by 10 to 30 %."""
_TENTHS_APART = 2.563
"""Between the tenth and the ninetieth percentile lie this many SD of a normal distribution."""
_MOST = 0.5


def count_findings(
    name: str,
    counts: VoxelCounts,
    used: Mask,
    trimmed: Mask,
    n_voxels: int,
    limit: float,
    r2star: R2StarSummary,
) -> tuple[Finding, ...]:
    """Tell of voxels that are over the limit, failed, trimmed, or few."""
    found = []
    over, failed = int(counts.over.sum()), int(counts.failed.sum())
    is_joint = r2star.statistic == "joint"
    if r2star.qualifier == ">" or (over > _TOLD_CENSORED * n_voxels and not is_joint):
        consequence = (
            "The value is stated as over the limit."
            if r2star.qualifier == ">"
            else "The median stands, since they are the smaller part."
        )
        found.append(
            Finding.of(
                "censored-over-limit", region=name, share=f"{100 * over / n_voxels:.0f}",
                limit=f"{limit:.0f}", consequence=consequence,
            )
        )  # fmt: skip
    if r2star.qualifier == "<":
        found.append(Finding.of("censored-under-limit", region=name, limit=f"{r2star.value:.1f}"))
    if failed > _TOLD_FAILED * n_voxels:
        found.append(share_finding("many-failed", name, failed, n_voxels))
    n_trimmed = int(trimmed.sum())
    if n_trimmed > _TOLD_TRIMMED * n_voxels and r2star.before_trimming is not None:
        found.append(
            Finding.of(
                "many-trimmed", region=name, share=f"{100 * n_trimmed / n_voxels:.0f}",
                before=f"{r2star.before_trimming:.4g}", after=f"{r2star.value:.4g}",
            )
        )  # fmt: skip
    said = int(used.sum()) + over + int(counts.under.sum())
    if said < _FEW_VOXELS:
        found.append(Finding.of("few-voxels", region=name, n=said, wanted=_FEW_VOXELS))
    return tuple(found)


def uneven_iron(
    name: str,
    sample: NDArray[np.float64],
    stack: EchoStack,
    noise: NoiseLevel,
    value: float,
    s0: float,
) -> tuple[Finding, ...]:
    """Tell where voxels differ by far more than noise explains, outliers or not."""
    low, high = censored_quantile(sample, 0.1), censored_quantile(sample, 0.9)
    if not (np.isfinite(low) and np.isfinite(high)):
        return ()  # censored voxels are told already
    bound = float(
        r2star_bound_per_s(stack.echo_times_ms, value, s0, noise.sigma, n=noise.n_channels)
    )
    spread = (high - low) / _TENTHS_APART
    if spread**2 - bound**2 <= (_UNEVEN * value) ** 2:
        return ()
    told = {"low": f"{low:.0f}", "high": f"{high:.0f}", "median": f"{value:.0f}"}
    return (Finding.of("uneven-iron", region=name, **told),)


def check_echoes(
    name: str, used: Mask, stack: EchoStack, noise: NoiseLevel, fit: DecayFit
) -> tuple[Finding, ...]:
    """Tell where most voxels have signal in two echoes only, so that nothing checks their decay."""
    if stack.n_echoes == 2 or not used.any():
        return ()  # two echoes are told for the study as a whole
    share = float((usable_echoes(used, stack, noise, fit) <= 2).mean())
    if share <= _MOST:
        return ()
    return (Finding.of("two-usable-echoes", region=name, share=f"{100 * share:.0f}"),)


def share_finding(code: str, name: str, part: int, whole: int) -> Finding:
    """Make a finding that tells a share of voxels."""
    return Finding.of(code, region=name, share=f"{100 * part / whole:.0f}")
