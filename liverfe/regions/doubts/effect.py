"""`Effect`: what a doubt does to R2* and LIC, and how much a reader has to know of it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from liverfe.errors import Finding
from liverfe.wording import DOUBT_PHRASES

LicOfR2star = Callable[[float], float]

_TOLD = 0.02
"""A shift of R2* by less than this share is not told."""
_MATTERS = 0.045
"""A shift of R2* or LIC by this share, which is shown as 5 %, is a caution: it could move a LIC
across a decision ..."""
_MATTERS_PER_S = 2.0
"""... unless it is below this, in 1/s: 0.05 mg/g at 1.5 T, less at 3 T, decides nothing."""
_LEAST_LIC = 0.3
"""Below this LIC in mg/g a share of it says nothing."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Effect:
    """R2* of a region as it is stated, and as it would be without the fault.

    Attributes
    ----------
    stated_per_s, without_per_s : float
        Median R2* in 1/s.
    lic : callable or None
        From R2* to LIC in mg/g, where there is a curve.
    """

    stated_per_s: float
    without_per_s: float
    lic: LicOfR2star | None = None

    @property
    def shift(self) -> float:
        """Change of R2* as a share of the stated one."""
        return self.without_per_s / self.stated_per_s - 1.0

    @property
    def lic_shift(self) -> float | None:
        """Change of LIC as a share of the stated one; None without a curve or next to no iron."""
        if self.lic is None or not self.lic(self.stated_per_s) > _LEAST_LIC:
            return None
        return self.lic(self.without_per_s) / self.lic(self.stated_per_s) - 1.0

    @property
    def is_large(self) -> bool:
        """Whether it could move a LIC across a decision."""
        return max(abs(self.shift), abs(self.lic_shift or 0.0)) >= _MATTERS

    def facts(self) -> dict[str, str]:
        """The shift in words: ``+6 %``, or ``+6 % (LIC +7 %)``."""
        text = f"{100 * self.shift:+.0f} %"
        if self.lic_shift is not None:
            text += DOUBT_PHRASES["lic-shift"].format(shift=f"{100 * self.lic_shift:+.0f}")
        return {"shift": text}

    def findings(
        self, kind: str, facts: dict[str, str], *, is_notable: bool = False
    ) -> tuple[Finding, ...]:
        """Tell a doubt by its effect.

        Parameters
        ----------
        kind : str
            Its code as a caution, and its phrase as a note.
        facts : dict
            What its words need; the region among them, the shift not.
        is_notable : bool
            Whether it is noted though it moves R2* little.

        Returns
        -------
        tuple of Finding
            A caution, a note or nothing.
        """
        facts = facts | self.facts()
        if self.is_large and abs(self.without_per_s - self.stated_per_s) >= _MATTERS_PER_S:
            return (Finding.of(kind, **facts),)
        if not is_notable and not abs(self.shift) >= _TOLD:
            return ()
        what = DOUBT_PHRASES[kind].format(**facts)
        told = {"region": facts["region"], "what": what, "shift": facts["shift"]}
        return (Finding.of("decay-slightly-off", **told),)


def without_effect(rate_per_s: float) -> Effect:
    """An effect that is not known and counts as none."""
    return Effect(stated_per_s=rate_per_s, without_per_s=rate_per_s)


def largest(effects: list[Effect]) -> Effect:
    """The effect with the largest shift of R2*."""
    return effects[int(np.argmax([abs(effect.shift) for effect in effects]))]
