"""A plan of NIfTI volumes -> its stack, every file read once and to its end."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from liverfe.acquire.echo_last import echo_last
from liverfe.acquire.nifti.values import read_values
from liverfe.acquire.nifti.volume import VolumePart
from liverfe.acquire.plan import InputFile, LoadedStack, StackPlan
from liverfe.acquire.plausible import (
    FULL_SCALES,
    Brightest,
    brightest,
    check_order,
    check_saturation,
    check_sign,
)
from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused


def load_nifti(plan: StackPlan) -> LoadedStack:
    """Load a plan of NIfTI volumes; see `liverfe.acquire.load_stack`."""
    assert plan.shape is not None
    assert plan.grid is not None
    parts = [part for part in plan.parts if isinstance(part, VolumePart)]
    x, y, z = plan.shape
    signal = np.empty((len(parts), z, y, x), dtype=np.float32)
    inputs: dict[Path, InputFile] = {}
    tops: list[Brightest] = []
    for path in dict.fromkeys(part.file.path for part in parts):
        of_file = [(echo, part) for echo, part in enumerate(parts) if part.file.path == path]
        values, inputs[path] = read_values(of_file[0][1].file)
        for echo, part in of_file:
            stored = values[part.volume]
            _scale_into(signal[echo], stored, part.file.slope, part.file.intercept)
            if echo < 2:
                tops.append(brightest(stored))
    for sidecar in sorted({sidecar for part in parts for sidecar in part.sidecars}):
        data = sidecar.read_bytes()
        inputs[sidecar] = InputFile(
            path=sidecar, sha256=hashlib.sha256(data).hexdigest(), n_bytes=len(data)
        )
    findings = [*plan.findings, *_plausibility(parts, signal, tops)]
    stops = [f for f in findings if f.level == "stop" and f not in plan.findings]
    if stops:
        raise StudyRefused(*stops)
    stack = EchoStack(
        magnitude=echo_last(signal),
        echo_times_ms=np.array(plan.echo_times_ms),
        grid=plan.grid,
        present=plan.present,
        acquisition=plan.acquisition,
        subject=plan.subject,
        layout=plan.layout,
        left_out=plan.left_out,
        findings=tuple(findings),
    )
    ordered = tuple(sorted(inputs.values(), key=lambda source: source.path))
    return LoadedStack(stack=stack, inputs=ordered)


def _scale_into(
    target: NDArray[np.float32], stored: NDArray[Any], slope: float, intercept: float
) -> None:
    if slope == 1.0 and intercept == 0.0:
        target[...] = stored
    else:
        target[...] = stored.astype(np.float64) * slope + intercept
    # A value that is no number is a missing one.
    target[~np.isfinite(target)] = np.nan


def _plausibility(
    parts: list[VolumePart], signal: NDArray[np.float32], tops: list[Brightest]
) -> Iterator[Finding]:
    where = f"file {parts[0].file.name}"
    is_signed = parts[0].file.kind[1] in "if" or parts[0].file.intercept < 0
    if is_signed:
        n_negative = int(np.count_nonzero(signal < 0))
        yield from check_sign(n_negative, int(np.count_nonzero(signal)), where=where)
    if len(parts) < 2:
        return
    means = [float(np.nanmean(volume, dtype=np.float64)) for volume in signal]
    yield from check_order(means, where=where)
    is_whole = parts[0].file.kind[1] in "iu"
    top = tops[0].highest
    full_scale = next((s for s in FULL_SCALES if s == top), None) if is_whole else None
    yield from check_saturation(tops[0], tops[1], full_scale=full_scale, where=where)
