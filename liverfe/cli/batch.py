"""`liverfe batch`: every study under a folder."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Any

import typer

from liverfe.cli.frame import (
    AsJson,
    BandsKey,
    CurveFiles,
    CurveKey,
    EchoTimes,
    FieldStrength,
    IdentityChoice,
    MethodFile,
    Out,
)
from liverfe.cli.screen import batch_listener, say, show, show_document, show_table
from liverfe.wording import command_help
from liverfe.wording import command_line as words

_SHOWN_AT_MOST = 30
"""Rows on screen, the worst first; all of them stand in the summary."""


def batch(
    root: Annotated[
        Path, typer.Argument(metavar="ROOT", exists=True, file_okay=False, help=command_help.ROOT)
    ],
    out: Out,
    workers: Annotated[
        int | None, typer.Option("--workers", metavar="N", help=command_help.OPT_WORKERS)
    ] = None,
    timeout_min: Annotated[
        float | None, typer.Option("--timeout-min", metavar="M", help=command_help.OPT_TIMEOUT)
    ] = None,
    dry_run: Annotated[bool, typer.Option("--dry-run", help=command_help.OPT_DRY_RUN)] = False,
    curve: CurveKey = None,
    bands: BandsKey = None,
    method: MethodFile = None,
    curve_file: CurveFiles = None,
    identity: IdentityChoice = None,
    echo_times_ms: EchoTimes = None,
    field_t: FieldStrength = None,
    as_json: AsJson = False,
) -> int:
    """Measure every study under ROOT; 4 where some are refused or failed."""
    from liverfe.batch import plan_batch, run_batch
    from liverfe.journey import read_echo_times, resolve_settings

    settings = resolve_settings(
        {
            "curve": curve,
            "bands": bands,
            "method": method,
            "curve_file": curve_file,
            "identity": identity,
            "workers": workers,
            "timeout_min": timeout_min,
        }
    )
    act = plan_batch if dry_run else run_batch
    with batch_listener() as listener:
        document = act(
            root,
            out,
            settings=settings,
            echo_times_ms=read_echo_times(echo_times_ms),
            field_strength_t=field_t,
            listener=listener,
        )
    if as_json:
        show_document(document)
    elif dry_run:
        _show_plan(document)
    else:
        _show_rows(document)
    return int(document["exit_status"])


def _show_plan(document: dict[str, Any]) -> None:
    show_table(
        words.PLAN_COLUMNS,
        [_plan_row(study) for study in document["studies"]],
        title=words.PLAN_TITLE,
    )
    for study in document["studies"]:
        if study["reason"]:
            show(words.PLAN_REFUSED.format(**study))
        for entry in study["rejected"]:
            show(words.PLAN_REJECTED.format(name=study["name"], **entry))
    show(document["estimate"])
    show(document["summary"])


def _plan_row(study: dict[str, Any]) -> tuple[str, ...]:
    field = study["field_strength_t"]
    return (
        study["name"],
        study["outcome"],
        words.PLAN_ECHOES.format(**study),
        ", ".join(f"{time:g}" for time in study["echo_times_ms"]),
        words.FIELD_T.format(field=field) if field else words.FIELD_UNKNOWN,
        study["curve"] or words.NO_CURVE,
        str(study["n_region_files"]),
    )


def _show_rows(document: dict[str, Any]) -> None:
    looked_at = document["to_look_at"]
    for line in looked_at[:_SHOWN_AT_MOST]:
        show(line)
    unseen = looked_at[_SHOWN_AT_MOST:]
    if unseen:
        show(words.BATCH_MORE.format(n=len(unseen)))
    say(words.BATCH_SUMMARY_AT.format(path=document["summary_csv"]))
    show(document["summary"])
