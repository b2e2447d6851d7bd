"""How a run tells where it is, without knowing who listens."""

from __future__ import annotations

from typing import Protocol


class Progress(Protocol):
    """A listener: called with the step at hand and how far it is.

    It must return quickly and must not raise; a step with ``total`` 0 has no known length.
    """

    def __call__(self, step: str, done: int, total: int) -> None:
        """Take note.

        Parameters
        ----------
        step : str
            A key of `liverfe.wording.command_line.STEPS`.
        done, total : int
            How much of the step is done.
        """


def no_progress(step: str, done: int, total: int) -> None:
    """Listen to nothing.

    Parameters
    ----------
    step : str
        Passed over.
    done, total : int
        Passed over.
    """
