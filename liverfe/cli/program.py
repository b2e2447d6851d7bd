"""The `liverfe` program: its commands, and what it answers to whatever happens in them."""

from __future__ import annotations

import atexit
import gc
import logging
import os
import signal
import sys
import threading
import warnings
from collections.abc import Sequence
from types import FrameType
from typing import Annotated

import typer

from liverfe import __version__
from liverfe.cli import batch, curves, inspect, phantom, run, verify
from liverfe.cli.faults import answer_fault, answer_system_error, answer_usage
from liverfe.cli.frame import Command, Group
from liverfe.errors import UsageError
from liverfe.wording import command_help as words
from liverfe.wording.command_line import INTERRUPTED

STATUS_DONE = 0
STATUS_INTERRUPTED = 130

_NAME = "liverfe"

_OBJECTS_BETWEEN_SEARCHES = 50_000
"""Python looks for unreachable cycles each 700 new objects; importing the libraries of a run makes
half a million, none of them garbage, and a tenth of the run would go into looking."""


def _print_version(wanted: bool) -> None:
    if wanted:
        print(f"{_NAME} {__version__}")
        raise typer.Exit


app = typer.Typer(
    cls=Group,
    help=words.PROGRAM,
    epilog=words.PROGRAM_EXAMPLES,
    no_args_is_help=True,
    rich_markup_mode=None,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
)


@app.callback()
def _program(
    version: Annotated[
        bool,
        typer.Option("--version", callback=_print_version, is_eager=True, help=words.OPT_VERSION),
    ] = False,
) -> None:
    """Take the options that stand before any command."""


_COMMANDS = (
    ("inspect", inspect.inspect, words.INSPECT, words.INSPECT_SHORT, words.INSPECT_EXAMPLES),
    ("run", run.run, words.RUN, words.RUN_SHORT, words.RUN_EXAMPLES),
    ("batch", batch.batch, words.BATCH, words.BATCH_SHORT, words.BATCH_EXAMPLES),
    ("curves", curves.curves, words.CURVES, words.CURVES_SHORT, words.CURVES_EXAMPLES),
    ("verify", verify.verify, words.VERIFY, words.VERIFY_SHORT, words.VERIFY_EXAMPLES),
)
for _name_typed, _function, _help, _short, _examples in _COMMANDS:
    app.command(_name_typed, cls=Command, help=_help, short_help=_short, epilog=_examples)(
        _function
    )
app.add_typer(phantom.app, name="phantom")


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the program.

    Parameters
    ----------
    arguments : sequence of str, optional
        What stands after the program's name; of this process by default.

    Returns
    -------
    int
        The exit status: 0 done, 1 a fault of ours, 2 wrong usage, 3 refused or different,
        4 a batch with studies refused or failed, 130 interrupted.
    """
    given = list(sys.argv[1:] if arguments is None else arguments)
    as_json = "--json" in given
    _seldom_look_for_garbage()
    _quieten_libraries()
    _let_interrupt_answer()
    try:
        status = typer.main.get_command(app).main(given, prog_name=_NAME, standalone_mode=False)
    except typer.TyperException as error:
        return answer_usage(error, as_json=as_json)
    except UsageError as error:
        return answer_usage(error, as_json=as_json)
    except (KeyboardInterrupt, typer.Abort):
        return _interrupted()
    except BrokenPipeError:
        # Whoever read our output has left; nothing more can be said.
        sys.stdout = open(os.devnull, "w", encoding="utf-8")  # noqa: SIM115 - until the end
        return STATUS_DONE
    except OSError as error:
        return answer_system_error(error, as_json=as_json)
    except Exception as error:
        return answer_fault(error, as_json=as_json)
    if status == STATUS_INTERRUPTED:
        return _interrupted()
    return status if isinstance(status, int) else STATUS_DONE


def _quieten_libraries() -> None:
    """Keep warnings of libraries off the screen: they quote what stands in headers."""
    if os.environ.get("LIVERFE_TRACEBACK") != "1":
        warnings.simplefilter("ignore")
        logging.lastResort = None


def _seldom_look_for_garbage() -> None:
    """Spare a short run the searches of Python's collector, and those at its very end."""
    gc.set_threshold(_OBJECTS_BETWEEN_SEARCHES, 20, 20)
    # Memory goes back to the system with the process; taking it apart first takes a third of a
    # second. What has to be closed was closed by whoever opened it.
    atexit.register(gc.freeze)


def _let_interrupt_answer() -> None:
    """Make the first Ctrl-C stop the work and clean up, and a second one skip the cleaning."""
    if threading.current_thread() is threading.main_thread():
        signal.signal(signal.SIGINT, _first_interrupt)


def _first_interrupt(number: int, frame: FrameType | None) -> None:
    signal.signal(signal.SIGINT, _second_interrupt)
    raise KeyboardInterrupt


def _second_interrupt(number: int, frame: FrameType | None) -> None:
    os._exit(STATUS_INTERRUPTED)


def _interrupted() -> int:
    print(INTERRUPTED, file=sys.stderr, flush=True)
    others = [t for t in threading.enumerate() if t is not threading.current_thread()]
    if any(not thread.daemon for thread in others):
        # A thread in the middle of a figure would hold the process up for a second or two.
        os._exit(STATUS_INTERRUPTED)
    return STATUS_INTERRUPTED
