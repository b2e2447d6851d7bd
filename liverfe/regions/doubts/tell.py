"""From residuals to findings: is there a misfit, what explains it best, and what does it do?"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.special import chdtrc

from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused
from liverfe.fit import DecayFit
from liverfe.noise import NoiseLevel
from liverfe.regions.doubts.bends import field_gradient, flattening
from liverfe.regions.doubts.echoes import alternating, neighbours, one_echo, scattered
from liverfe.regions.doubts.effect import Effect, LicOfR2star, largest, without_effect
from liverfe.regions.doubts.fat import fat
from liverfe.regions.doubts.generic import (
    noisy_echo,
    rate_with_stronger_noise,
    rate_without,
    rate_without_the_worst_echo,
    too_scattered,
)
from liverfe.regions.doubts.misfit import Misfit, misfit
from liverfe.regions.doubts.order import lost_echo, other_order
from liverfe.regions.doubts.sample import Sample, draw_sample
from liverfe.regions.doubts.suspect import (
    Explanation,
    Suspect,
    distortion,
    explain,
    first_look,
)
from liverfe.wording import DOUBT_PHRASES

Mask = NDArray[np.bool_]

_CHANCE = 1e-6
"""A misfit that noise alone brings about less often than this is a misfit: so rare, because the
correlation of neighbours is known to a third only, and real faults are far beyond."""
_FEWEST_ECHOES = 5
"""With fewer, one number more explains everything, and nothing is told from anything else."""
_FEWEST_VOXELS = 20
_ENOUGH_VOXELS = 500
"""Voxels on which suspects are tried, where these show the misfit too."""
_CLOSE = 20.0
_CLOSE_SHARE = 0.3
"""Kinds of suspects within these of the best at first look, in AICc and as a share of the whole
misfit, are worked out in full: the first look is exact for small distortions only."""
_LEFT = 0.15
"""A suspect explains a misfit if no more than this share of it is left, or no more than chance."""
_LEFT_BY_ORDER = 0.02
"""Another order has to leave less: some order makes any unevenness smaller."""
_LEAST_VOXELS = 0.5
"""What leaves less than this share of the voxels with a decay explains nothing."""
_NOTABLE = 0.08
"""A distortion that changes echoes against each other by this in ln signal is told in any case."""


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class DecayCheck:
    """What came out of asking whether a region decays with one exponential.

    Attributes
    ----------
    findings : tuple of Finding
        Doubts: at most one about the shape of the decay, or one about its scatter.
    residual, residual_se : ndarray of float64, shape (E,), or None
        As in `RegionDecay`.
    """

    findings: tuple[Finding, ...] = ()
    residual: NDArray[np.float64] | None = None
    residual_se: NDArray[np.float64] | None = None


def examine_decay(
    name: str,
    voxels: Mask,
    stack: EchoStack,
    noise: NoiseLevel,
    fit: DecayFit,
    *,
    known: tuple[Finding, ...] = (),
    tells: bool = True,
    lic: LicOfR2star | None = None,
) -> DecayCheck:
    """Ask whether a region decays with one exponential, and if not, why and with what effect.

    The pooled residual of each echo is tested against its own scatter. Where it is no chance, each
    suspect (one echo or several off, odd against even echoes, fat, a field gradient, a slow or
    constant part, a lost echo, another order) is taken out of the signal, and the best by AICc is
    told with what R2* does without it: one finding for one cause. Where none explains it, or the
    voxels scatter more than noise does, the misfit itself is told.

    Parameters
    ----------
    name : str
        The region's name.
    voxels : ndarray of bool, shape (X, Y, Z)
        Its voxels that were not trimmed, those over the limit among them.
    stack, noise, fit
        Images, noise and fits.
    known : tuple of Finding
        From `check_decay`; a cause that is found replaces them.
    tells : bool
        Whether the region's R2* is a number that doubts could move; else residuals alone.
    lic : callable or None
        From R2* to LIC in mg/g, to state effects on it too.

    Returns
    -------
    DecayCheck
        Findings and residuals by echo.

    Raises
    ------
    StudyRefused
        ``echoes-swapped``, if the images fit one decay in another order than the stated one.
    """
    if stack.n_echoes == 2:
        return DecayCheck(findings=(*known, Finding.of("two-echoes")))
    if not voxels.any():
        return DecayCheck(findings=known)
    sample = draw_sample(voxels, stack, noise, fit)
    check = examine_sample(
        name, sample, stack.acquisition.field_strength_t, known=known, tells=tells, lic=lic
    )
    if stack.n_echoes >= _FEWEST_ECHOES:
        return check
    few = Finding.of("few-echoes", n=stack.n_echoes)
    return replace(check, findings=(*check.findings, few))


def examine_sample(
    name: str,
    sample: Sample,
    field_strength_t: float | None,
    *,
    known: tuple[Finding, ...] = (),
    tells: bool = True,
    lic: LicOfR2star | None = None,
) -> DecayCheck:
    """Ask the same of voxels that were drawn already."""
    found = misfit(sample)
    n_voxels = len(found.z)
    if n_voxels < _FEWEST_VOXELS:
        return DecayCheck(findings=known)
    findings = known
    if tells and found.median_rate_per_s > 0:
        findings = _findings(name, sample, found, field_strength_t, lic) or known
    share = found.share.mean(axis=0) * max(found.scatter, 1.0) * sample.inflation
    return DecayCheck(
        findings=findings,
        residual=found.pulls / n_voxels,
        residual_se=np.sqrt(share / n_voxels),
    )


def _findings(
    name: str,
    sample: Sample,
    found: Misfit,
    field_strength_t: float | None,
    lic: LicOfR2star | None,
) -> tuple[Finding, ...]:
    degrees = found.basis.shape[1]
    if degrees and not found.is_small and chdtrc(degrees, found.strain()) < _CHANCE:
        few = sample.thinned(_ENOUGH_VOXELS)
        found_few = misfit(few)
        if chdtrc(degrees, found_few.strain()) < _CHANCE:
            sample, found = few, found_few
        why = _best_explanation(sample, found, field_strength_t)
        if why is not None:
            return _told(name, why, found, lic)
        return _poor_fit(name, sample, found, lic)
    loose = noisy_echo(sample, found)
    if loose is not None:
        effect = Effect(
            stated_per_s=found.median_rate_per_s, without_per_s=rate_without(sample, loose), lic=lic
        )
        facts = {"region": name, "te": f"{sample.echo_times_ms[loose]:.4g}"}
        return effect.findings("echo-noisy", facts, is_notable=True)
    return _poor_fit(name, sample, found, lic) if too_scattered(sample, found) else ()


def _suspects(sample: Sample, found: Misfit, field_strength_t: float | None) -> Iterator[Suspect]:
    times = sample.echo_times_ms
    yield from one_echo(times)
    yield from neighbours(times)
    yield from scattered(times, found)
    yield alternating(times)
    yield field_gradient(times)
    yield from flattening(times)
    oscillation = fat(times, field_strength_t)
    if oscillation is not None:
        yield oscillation


def _best_explanation(
    sample: Sample, found: Misfit, field_strength_t: float | None
) -> Explanation | None:
    """The suspect with the best AICc, if it leaves little enough."""
    if len(sample.echo_times_ms) < _FEWEST_ECHOES:
        return None
    looks = {s: first_look(s, found) for s in _suspects(sample, found, field_strength_t)}
    close = min(looks.values()) + max(_CLOSE, _CLOSE_SHARE * found.strain(1.0))
    likeliest: dict[tuple[object, ...], Suspect] = {}
    for suspect in sorted(looks, key=looks.__getitem__):  # of each kind the best
        if looks[suspect] <= close:
            sort = (suspect.kind, suspect.n_sizes, suspect.variant)
            likeliest.setdefault(sort, suspect)
    lost = lost_echo(sample.echo_times_ms, found)
    explained = [explain(suspect, sample, found) for suspect in (*likeliest.values(), lost)]
    reordered = other_order(sample)
    if reordered is not None:
        explained.append(explain(reordered, sample, found))
    whole = [one for one in explained if len(one.after.z) > _LEAST_VOXELS * len(found.z)]
    scatter = max(min(one.after.scatter for one in whole), 1.0)
    before = found.strain(scatter)

    def suffices(one: Explanation) -> bool:
        left = _LEFT_BY_ORDER if one.suspect.order is not None else _LEFT
        chance = chdtrc(found.basis.shape[1], one.after.strain()) > _CHANCE
        return bool(chance or one.after.strain(scatter) < left * before)

    best = min(whole, key=lambda one: one.aicc(scatter) if suffices(one) else np.inf)
    return best if suffices(best) else None


def _told(
    name: str, why: Explanation, found: Misfit, lic: LicOfR2star | None
) -> tuple[Finding, ...]:
    effect = Effect(
        stated_per_s=found.median_rate_per_s, without_per_s=why.after.median_rate_per_s, lic=lic
    )
    facts = {"region": name} | {
        key: str(value) for key, value in why.suspect.facts.items() if key != "echoes"
    }
    kind, is_notable = why.suspect.kind, False
    if len(why.sizes):
        log = distortion(why.suspect, why.sizes, why.after)
        is_notable = float(np.ptp(np.atleast_2d(log), axis=1).mean()) > _NOTABLE
        facts["size"] = f"{100 * abs(np.expm1(why.sizes[0])):.0f}"
        facts["percent"] = f"{100 * why.sizes[0]:.0f}"
        facts["sigmas"] = f"{why.sizes[0]:+.1f}"
    if "part" in facts:
        facts["part"] = DOUBT_PHRASES[facts["part"]].format(**facts)
    if kind == "echoes-swapped":
        code = kind if effect.is_large else f"{kind}-slightly"
        finding = Finding.of(code, **(facts | effect.facts()))
        if finding.level == "stop":
            raise StudyRefused(finding)
        return (finding,)
    return effect.findings(kind, facts, is_notable=is_notable)


def _poor_fit(
    name: str, sample: Sample, found: Misfit, lic: LicOfR2star | None
) -> tuple[Finding, ...]:
    """A misfit without a cause: its size is what one echo less, or more noise, would change."""
    stated = found.median_rate_per_s
    echo, less_per_s = rate_without_the_worst_echo(sample, found)
    louder_per_s = rate_with_stronger_noise(sample, found)
    rates = (less_per_s, louder_per_s)
    effect = largest([Effect(stated_per_s=stated, without_per_s=rate, lic=lic) for rate in rates])
    facts = {
        "region": name,
        "chi2": f"{found.scatter:.1f}",
        "te": f"{sample.echo_times_ms[echo]:.4g}",
    }
    if too_scattered(sample, found, far=True):
        return (Finding.of("poor-fit", **(facts | effect.facts())),)
    if len(sample.echo_times_ms) < _FEWEST_ECHOES:
        # Three or four echoes less one hang on the two ends: what they shift is no effect yet.
        return without_effect(stated).findings("poor-fit", facts, is_notable=True)
    return effect.findings("poor-fit", facts)
