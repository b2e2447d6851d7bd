"""What all commands share: help with examples first, and the options that recur."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any

import typer
from typer.core import TyperCommand, TyperGroup

from liverfe.wording import command_help as words


def _write_examples(formatter: Any, examples: str | None) -> None:
    # Typer's formatter has no public type; it is handed through as it comes.
    if not examples:
        return
    with formatter.section(words.EXAMPLES_HEADING):
        for line in examples.splitlines():
            formatter.write(f"  {line}\n")


class Command(TyperCommand):
    """A command whose help begins with examples: the epilog of its declaration."""

    def format_help(self, ctx: Any, formatter: Any) -> None:
        """Write examples, usage, description and options, in this order."""
        _write_examples(formatter, self.epilog)
        formatter.write("\n")
        self.format_usage(ctx, formatter)
        self.format_help_text(ctx, formatter)
        self.format_options(ctx, formatter)


class Group(TyperGroup):
    """A group of commands whose help begins with examples, in the order of the work."""

    def format_help(self, ctx: Any, formatter: Any) -> None:
        """Write examples, usage, description and commands, in this order."""
        _write_examples(formatter, self.epilog)
        formatter.write("\n")
        self.format_usage(ctx, formatter)
        self.format_help_text(ctx, formatter)
        self.format_options(ctx, formatter)

    def list_commands(self, ctx: Any) -> list[str]:
        """Keep the order in which the commands were declared."""
        return list(self.commands)


Inputs = Annotated[list[Path], typer.Argument(metavar="INPUT", exists=True, help=words.INPUT)]
AsJson = Annotated[bool, typer.Option("--json", help=words.OPT_JSON)]
Out = Annotated[Path, typer.Option("--out", metavar="DIR", help=words.OPT_OUT)]
CurveKey = Annotated[str | None, typer.Option("--curve", metavar="KEY", help=words.OPT_CURVE)]
BandsKey = Annotated[str | None, typer.Option("--bands", metavar="KEY", help=words.OPT_BANDS)]
MethodFile = Annotated[Path | None, typer.Option("--method", metavar="FILE", help=words.OPT_METHOD)]
IdentityChoice = Annotated[
    str | None, typer.Option("--identity", metavar="full|key", help=words.OPT_IDENTITY)
]
EchoTimes = Annotated[
    str | None, typer.Option("--echo-times-ms", metavar="LIST", help=words.OPT_ECHO_TIMES)
]
FieldStrength = Annotated[
    float | None, typer.Option("--field-t", metavar="TESLA", help=words.OPT_FIELD)
]
CurveFiles = Annotated[
    list[Path] | None,
    typer.Option(
        "--curve-file", metavar="FILE", exists=True, dir_okay=False, help=words.OPT_CURVE_FILE
    ),
]
