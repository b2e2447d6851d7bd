"""The screen: tables on standard output, messages and progress on standard error.

rich obeys ``NO_COLOR`` and ``TERM=dumb``, and draws a progress bar on a terminal only.
"""

from __future__ import annotations

import sys
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from liverfe.wording.command_line import FINDING_LINE, STEPS

if TYPE_CHECKING:
    from rich.console import Console

    from liverfe.batch import BatchListener
    from liverfe.journey import Progress

_WIDTH_WITHOUT_TERMINAL = 160
"""A table that goes into a file or a pipe is not folded to the width of a screen nobody has."""


def say(message: str) -> None:
    """Print a message on standard error."""
    print(message, file=sys.stderr, flush=True)


def show(line: str) -> None:
    """Print a line on standard output."""
    print(line, flush=True)


def show_document(document: Mapping[str, Any]) -> None:
    """Print one JSON document on standard output, as it stands in files."""
    from liverfe.export import to_json_bytes

    print(to_json_bytes(document).decode("utf-8").rstrip("\n"), flush=True)


def show_table(
    columns: Sequence[str], rows: Sequence[Sequence[str]], *, title: str | None = None
) -> None:
    """Print a table on standard output.

    Parameters
    ----------
    columns : sequence of str
        Headings.
    rows : sequence of sequence of str
        Cells; text only, no markup.
    title : str, optional
        Stands above it.
    """
    from rich import box
    from rich.table import Table
    from rich.text import Text

    table = Table(
        box=box.SIMPLE_HEAD,
        show_header=bool(columns),
        title=title,
        title_justify="left",
        title_style="bold",
        pad_edge=False,
    )
    for column in columns:
        table.add_column(column, overflow="fold")
    for row in rows:
        # Text, since a region's name may look like markup.
        table.add_row(*[Text(cell) for cell in row])
    console_for_output().print(table)


def console_for_output() -> Console:
    """Make the console that writes to standard output."""
    from rich.console import Console

    width = None if sys.stdout.isatty() else _WIDTH_WITHOUT_TERMINAL
    return Console(file=sys.stdout, width=width, highlight=False)


def show_findings(findings: Sequence[dict[str, str]]) -> None:
    """Say all findings on standard error, as they stand in a result document.

    Parameters
    ----------
    findings : sequence of dict
        Each with level, text and remedy.
    """
    for finding in findings:
        say(FINDING_LINE.format(**finding).strip())


@contextmanager
def progress_bar() -> Iterator[Progress]:
    """Draw progress on standard error where that is a terminal, else nothing.

    Yields
    ------
    Progress
        To be handed to the journey.
    """
    from liverfe.journey import no_progress

    if not sys.stderr.isatty():
        yield no_progress
        return
    with _Bar() as bar:
        yield bar.step


@contextmanager
def batch_listener() -> Iterator[BatchListener]:
    """Draw the progress of a batch with the time left, and name what goes wrong as it happens.

    Yields
    ------
    BatchListener
        To be handed to the batch. Without a terminal it prints a line a study.
    """
    if not sys.stderr.isatty():
        yield _Lines()
        return
    with _Bar() as bar:
        yield bar


class _Lines:
    """Standard error as a log: a line a study."""

    def step(self, step: str, done: int, total: int) -> None:
        """Say nothing: the lines tell."""

    def row(self, line: str, *, is_clean: bool) -> None:
        """Say what a study came to."""
        say(line)


class _Bar:
    """A bar on a terminal, lines of trouble above it."""

    def __init__(self) -> None:
        from rich.console import Console
        from rich.progress import BarColumn, Progress, TextColumn, TimeRemainingColumn

        self._bar = Progress(
            TextColumn("{task.description}"),
            BarColumn(),
            TextColumn("{task.fields[counted]}"),
            TimeRemainingColumn(),
            console=Console(stderr=True, highlight=False),
            transient=True,
        )
        self._step = ""
        self._task = self._bar.add_task("", total=None, visible=False, counted="")

    def __enter__(self) -> _Bar:
        self._bar.start()
        return self

    def __exit__(self, *unused: object) -> None:
        self._bar.stop()

    def step(self, step: str, done: int, total: int) -> None:
        """Move the bar; it pulses where nobody knows how long a step takes."""
        known = total or None
        if step != self._step:
            # Anew, since the pace of one step says nothing of the next.
            self._step = step
            self._bar.reset(self._task, total=known, description=STEPS[step], visible=True)
        counted = f"{done}/{total}" if known else ""
        self._bar.update(self._task, completed=done, total=known, counted=counted)

    def row(self, line: str, *, is_clean: bool) -> None:
        """Print what was not measured above the bar."""
        if not is_clean:
            self._bar.console.print(line, markup=False)
