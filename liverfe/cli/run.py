"""`liverfe run`: the main job, one study."""

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
    Inputs,
    MethodFile,
    Out,
)
from liverfe.cli.screen import progress_bar, say, show, show_document, show_findings, show_table
from liverfe.wording import CAUTION_SHORT, command_help
from liverfe.wording import command_line as words
from liverfe.wording.digits import shown


def run(
    inputs: Inputs,
    out: Out,
    regions: Annotated[
        Path | None,
        typer.Option(
            "--regions",
            metavar="FILE",
            exists=True,
            dir_okay=False,
            help=command_help.OPT_REGIONS,
        ),
    ] = None,
    stack: Annotated[
        int | None, typer.Option("--stack", metavar="N", min=1, help=command_help.OPT_STACK)
    ] = None,
    curve: CurveKey = None,
    bands: BandsKey = None,
    method: MethodFile = None,
    curve_file: CurveFiles = None,
    identity: IdentityChoice = None,
    echo_times_ms: EchoTimes = None,
    field_t: FieldStrength = None,
    as_json: AsJson = False,
) -> int:
    """Measure one study; 3 where it is refused."""
    from liverfe.journey import choose_method, read_echo_times, resolve_settings, run_study

    settings = resolve_settings(
        {
            "curve": curve,
            "bands": bands,
            "method": method,
            "curve_file": curve_file,
            "identity": identity,
        }
    )
    chosen, site_curves = choose_method(settings)
    with progress_bar() as progress:
        outcome = run_study(
            inputs,
            out=out,
            regions=regions,
            method=chosen,
            site_curves=site_curves,
            stack_number=stack,
            echo_times_ms=read_echo_times(echo_times_ms),
            field_strength_t=field_t,
            identity=settings.identity,
            progress=progress,
        )
    if as_json:
        show_document(outcome.document)
    elif outcome.refused:
        _show_refusal(outcome.document, outcome.report)
    else:
        _show_result(outcome.document, outcome.report)
    return 3 if outcome.refused else 0


def _show_refusal(document: dict[str, Any], report: Path) -> None:
    show_findings([f for f in document["findings"] if f["level"] != "stop"])
    show(words.REPORT_AT.format(path=report))
    stops = [f"{f['text']} {f['remedy']}" for f in document["findings"] if f["level"] == "stop"]
    say(words.REFUSED_LINE.format(reason=" ".join(stops)))


def _show_result(document: dict[str, Any], report: Path) -> None:
    show_findings(document["findings"])
    if document["regions"]:
        show_table(
            (
                words.TABLE_REGION,
                words.TABLE_ORGAN,
                words.TABLE_VOXELS,
                words.TABLE_R2STAR,
                words.TABLE_INTERVAL,
                words.TABLE_LIC,
                words.TABLE_INTERVAL,
                words.TABLE_BAND,
            ),
            [_row(region) for region in document["regions"]],
        )
    show(words.REPORT_AT.format(path=report))
    show(CAUTION_SHORT)
    show(_last_line(document))


def _row(region: dict[str, Any]) -> tuple[str, ...]:
    return (
        region["name"],
        region["organ"],
        words.USED_OF.format(used=region["n_used"], all=region["n_voxels"]),
        _value(region["r2star_per_s"], "r2star_per_s"),
        _interval(region["r2star_per_s"], "r2star_per_s"),
        _value(region["lic_mg_per_g"], "lic_mg_per_g"),
        _interval(region["lic_mg_per_g"], "lic_mg_per_g"),
        region["band"]["name"] if region["band"] else shown(None, "lic_mg_per_g"),
    )


def _value(measured: dict[str, Any] | None, quantity: str) -> str:
    if measured is None:
        return shown(None, quantity)
    mark = "" if measured["qualifier"] == "=" else f"{measured['qualifier']} "
    return f"{mark}{shown(measured['value'], quantity)}"


def _interval(measured: dict[str, Any] | None, quantity: str) -> str:
    if measured is None:
        return shown(None, quantity)
    return words.INTERVAL_CELL.format(
        low=shown(measured["low"], quantity), high=shown(measured["high"], quantity)
    )


def _last_line(document: dict[str, Any]) -> str:
    cautions = [f["text"] for f in document["findings"] if f["level"] == "caution"]
    reason = cautions[0] if cautions else words.NO_LIC_REASON
    region = next((r for r in document["regions"] if r["name"] == document["headline"]), None)
    if region is None:
        return words.NO_REGION_LINE.format(reason=reason)
    if region["lic_mg_per_g"] is None:
        r2star = _value(region["r2star_per_s"], "r2star_per_s")
        return words.LIC_NONE.format(region=region["name"], r2star=r2star, reason=reason)
    lic = region["lic_mg_per_g"]
    measured = words.INTERVAL.format(interval=_interval(lic, "lic_mg_per_g"))
    return words.LIC_LINE.format(
        region=region["name"],
        lic=_value(lic, "lic_mg_per_g"),
        interval=measured if lic["qualifier"] == "=" else "",
        band=words.LIC_BAND.format(**region["band"]) if region["band"] else "",
        curve=words.LIC_CURVE.format(
            key=document["calibration"]["key"], field=document["stack"]["field_strength_t"]
        ),
    )
