"""How a batch tells where it is, without knowing who listens."""

from __future__ import annotations

from typing import Protocol


class BatchListener(Protocol):
    """Hears of a batch; must return quickly and must not raise."""

    def step(self, step: str, done: int, total: int) -> None:
        """Hear how far it is.

        Parameters
        ----------
        step : str
            A key of `liverfe.wording.command_line.STEPS`.
        done, total : int
            Studies.
        """

    def row(self, line: str, *, is_clean: bool) -> None:
        """Hear of a study that ended.

        Parameters
        ----------
        line : str
            Its key and what it came to.
        is_clean : bool
            Whether it was measured.
        """


class Silence:
    """Listens to nothing."""

    def step(self, step: str, done: int, total: int) -> None:
        """Let it pass."""

    def row(self, line: str, *, is_clean: bool) -> None:
        """Let it pass."""
