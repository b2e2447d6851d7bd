"""Time that has passed, time that is left, and how both are told."""

from __future__ import annotations

import time
from dataclasses import dataclass, field

from liverfe.wording.command_line import HOURS, MINUTES, SECONDS


@dataclass(frozen=True, slots=True)
class Stopwatch:
    """Runs from its birth, on a clock that never jumps."""

    _start: float = field(default_factory=time.monotonic)

    @property
    def seconds(self) -> float:
        """Seconds since it was started."""
        return time.monotonic() - self._start

    def left_of(self, limit_s: float) -> float:
        """Seconds until `limit_s` have passed; 0 when they have."""
        return max(0.0, limit_s - self.seconds)


def told_duration(seconds: float) -> str:
    """Tell a duration in the unit that suits it."""
    if seconds < 90:
        return SECONDS.format(seconds=seconds)
    if seconds < 5400:
        return MINUTES.format(minutes=seconds / 60)
    return HOURS.format(hours=seconds / 3600)
