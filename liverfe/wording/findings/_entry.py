"""One row of the table of findings."""

from dataclasses import dataclass
from typing import Literal

Level = Literal["note", "caution", "stop"]


@dataclass(frozen=True, slots=True, kw_only=True)
class FindingWording:
    """The words of one finding.

    Attributes
    ----------
    level : {'note', 'caution', 'stop'}
        `note`: corrected or harmless; `caution`: a reader must see it; `stop`: nothing to trust.
    text : str
        What was found and where; ``{names}`` are filled in by `liverfe.errors.Finding.of`.
    effect : str
        What it would do to the LIC if nobody noticed.
    remedy : str
        What to do; may hold ``{names}`` too.
    """

    level: Level
    text: str
    effect: str
    remedy: str
