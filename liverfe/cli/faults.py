"""Answers to a wrong call, to the system's refusals, and to our own faults.

A traceback may hold what stands in a header, so it is shown on request only; an incident names
the kind and the place of a fault and nothing else.
"""

from __future__ import annotations

import json
import os
import sys
import traceback

import typer

from liverfe.errors import UsageError
from liverfe.wording.command_line import FAULT, FAULT_NEXT, SYSTEM_FAULT, USAGE_HINT

_STATUS_FAULT = 1
_STATUS_USAGE = 2


def answer_usage(error: typer.TyperException | UsageError, *, as_json: bool) -> int:
    """Say what is wrong with the call.

    Parameters
    ----------
    error : TyperException or UsageError
        From the parser, or from a room.
    as_json : bool
        Whether standard output wants a document.

    Returns
    -------
    int
        Exit status 2.
    """
    message = error.format_message() if isinstance(error, typer.TyperException) else str(error)
    context = getattr(error, "ctx", None)
    if not message and context is not None:
        # Called with nothing at all: the help is the answer.
        message = context.get_help()
    elif context is not None:
        message = f"{message}\n{USAGE_HINT.format(command=context.command_path)}"
    print(message, file=sys.stderr)
    if as_json:
        _print_error_document("usage", message)
    return _STATUS_USAGE


def answer_system_error(error: OSError, *, as_json: bool) -> int:
    """Say what the system refused: a full disk, a lost share, a right that is missing.

    Parameters
    ----------
    error : OSError
        As it came.
    as_json : bool
        Whether standard output wants a document.

    Returns
    -------
    int
        Exit status 1.
    """
    message = SYSTEM_FAULT.format(reason=error.strerror or type(error).__name__)
    _show_traceback()
    print(message, file=sys.stderr)
    if as_json:
        _print_error_document("system", message)
    return _STATUS_FAULT


def answer_fault(error: Exception, *, as_json: bool) -> int:
    """Own up to a fault of ours.

    Parameters
    ----------
    error : Exception
        Whatever came.
    as_json : bool
        Whether standard output wants a document.

    Returns
    -------
    int
        Exit status 1.
    """
    from liverfe.journey import describe_fault

    message = FAULT.format(**describe_fault(error))
    _show_traceback()
    print(f"{message}\n{FAULT_NEXT}", file=sys.stderr)
    if as_json:
        _print_error_document("fault", message)
    return _STATUS_FAULT


def _show_traceback() -> None:
    if os.environ.get("LIVERFE_TRACEBACK") == "1":
        traceback.print_exc()


def _print_error_document(kind: str, message: str) -> None:
    print(json.dumps({"schema": 1, "error": {"kind": kind, "message": message}}))
