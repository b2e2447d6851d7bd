"""`liverfe inspect`: from headers alone, is this scan usable?"""

from __future__ import annotations

from typing import Any

from liverfe.cli.frame import (
    AsJson,
    BandsKey,
    CurveFiles,
    CurveKey,
    EchoTimes,
    FieldStrength,
    Inputs,
    MethodFile,
)
from liverfe.cli.screen import progress_bar, say, show, show_document, show_findings, show_table
from liverfe.wording import command_line as words
from liverfe.wording.digits import shown


def inspect(
    inputs: Inputs,
    curve: CurveKey = None,
    bands: BandsKey = None,
    method: MethodFile = None,
    curve_file: CurveFiles = None,
    echo_times_ms: EchoTimes = None,
    field_t: FieldStrength = None,
    as_json: AsJson = False,
) -> int:
    """Show stacks, completeness, curve and range; 3 where nothing is usable."""
    from liverfe.journey import choose_method, inspect_inputs, read_echo_times, resolve_settings

    settings = resolve_settings(
        {"curve": curve, "bands": bands, "method": method, "curve_file": curve_file}
    )
    chosen, site_curves = choose_method(settings)
    with progress_bar() as progress:
        document = inspect_inputs(
            inputs,
            method=chosen,
            site_curves=site_curves,
            echo_times_ms=read_echo_times(echo_times_ms),
            field_strength_t=field_t,
            progress=progress,
        )
    if as_json:
        show_document({**document, "settings": settings.explained()})
    else:
        _show(document)
    return 0 if document["verdict"] == "usable" else 3


def _show(document: dict[str, Any]) -> None:
    for stack in document["stacks"]:
        _show_stack(stack)
    for left in document["left_out"]:
        show(f"{words.STACK_LEFT_OUT}: {_left_out(left)}")
    show_findings(document["findings"])
    show(document["reason"])


def _show_stack(stack: dict[str, Any]) -> None:
    title = words.STACK_TITLE if stack["number"] else words.STACK_TITLE_REFUSED
    rows = [
        (words.STACK_STUDY, stack["study_key"] or words.PLAN_NEW_KEY),
        (words.STACK_ECHOES, ", ".join(f"{time:g}" for time in stack["echo_times_ms"])),
        (words.STACK_SIZE, " x ".join(str(size) for size in stack["shape"] or ())),
        (words.STACK_COMPLETE, _completeness(stack)),
        (words.STACK_FIELD, _field(stack)),
        (words.STACK_CURVE, stack["curve"]["key"] if stack["curve"] else words.NO_CURVE),
        *[(words.STACK_RANGE.format(snr=row["snr"]), _range(row)) for row in stack["reportable"]],
        *[(words.STACK_LEFT_OUT, _left_out(left)) for left in stack["left_out"]],
    ]
    show_table((), rows, title=title.format(**stack))
    for line in stack["completeness"] or ():
        show(f"  {line}")
    for finding in stack["findings"]:
        say(words.FINDING_LINE.format(**finding))


def _completeness(stack: dict[str, Any]) -> str:
    if stack["completeness"] is None:
        return words.COMPLETE.format(
            n_echoes=len(stack["echo_times_ms"]), n_slices=stack["n_slices"]
        )
    return words.INCOMPLETE.format(**stack)


def _field(stack: dict[str, Any]) -> str:
    field = stack["field_strength_t"]
    return words.FIELD_T.format(field=field) if field else words.FIELD_UNKNOWN


def _range(row: dict[str, Any]) -> str:
    if row["r2star_per_s"] is None:
        return words.RANGE_NONE
    low, high = row["r2star_per_s"]
    text = words.RANGE_R2STAR.format(low=low, high=high)
    if row["lic_mg_per_g"] is None:
        return text
    low, high = [shown(value, "lic_mg_per_g") for value in row["lic_mg_per_g"]]
    return f"{text}; {words.RANGE_LIC.format(low=low, high=high)}"


def _left_out(left: dict[str, Any]) -> str:
    line = words.ONE_FILE if left["n_files"] == 1 else words.N_FILES
    return line.format(**left)
