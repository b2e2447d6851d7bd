"""`Cell` and `Row`: what was measured, what was asked, and whether it was reached."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

Say = Callable[[str], None]
"""Takes a line about how far a long measurement has come."""


def silent(_: str) -> None:
    """Say nothing."""


@dataclass(frozen=True, kw_only=True)
class Cell:
    """One measured figure of a row.

    Attributes
    ----------
    where : str
        Under which conditions.
    measured : float
        The figure; NaN where nothing could be measured.
    text : str
        The figure for a reader, with its unit.
    reached : bool
        Whether it is what was asked for, or as near as is proven possible.
    note : str
        The proof, the reason of a miss, or how sure the figure is.
    """

    where: str
    measured: float
    text: str
    reached: bool
    note: str = ""


@dataclass(frozen=True, kw_only=True)
class Row:
    """One row of the table.

    Attributes
    ----------
    key : str
        Its name on the command line.
    what : str
        What is measured.
    asked : str
        What must be reached.
    measured : str
        The worst cell, or the figure of the whole.
    cells : tuple of Cell
        All that was measured.
    remarks : tuple of str
        What a reader must know beside the figures.
    """

    key: str
    what: str
    asked: str
    measured: str
    cells: tuple[Cell, ...]
    remarks: tuple[str, ...] = ()

    @property
    def reached(self) -> bool:
        """Whether every cell reached what was asked; a row without cells did not."""
        return bool(self.cells) and all(cell.reached for cell in self.cells)

    @property
    def missed(self) -> tuple[Cell, ...]:
        """The cells that did not."""
        return tuple(cell for cell in self.cells if not cell.reached)


def worst(cells: Sequence[Cell], by: Callable[[Cell], float]) -> Cell:
    """The cell that is furthest out; one that could not be measured before all others."""
    return max(cells, key=lambda cell: (cell.measured != cell.measured, by(cell)))
