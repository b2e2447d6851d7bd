"""A plan of DICOM images -> its stack, every file read once.

Each file is read into memory, hashed, checked against the header that was surveyed, decoded and
scaled, all from the same bytes. Reading, hashing and scaling release Python's lock, so two
threads share them.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterable
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from liverfe.acquire.dicom.header import ImageHeader
from liverfe.acquire.dicom.header_checks import name_of
from liverfe.acquire.dicom.scaling import scale_into, settle_scaling
from liverfe.acquire.dicom.stored_values import (
    bit_range,
    check_bits,
    check_unchanged,
    stored_frames,
)
from liverfe.acquire.echo_last import echo_last
from liverfe.acquire.plan import InputFile, LoadedStack, SourceImage, StackPlan
from liverfe.acquire.plausible import (
    Brightest,
    brightest,
    check_order,
    check_saturation,
    check_sign,
)
from liverfe.echoes import EchoStack
from liverfe.errors import Finding, StudyRefused

_N_THREADS = 2


class _Target:
    """The arrays that the threads fill, each image its own part."""

    def __init__(self, plan: StackPlan) -> None:
        assert plan.shape is not None
        columns, rows, n_slices = plan.shape
        n_echoes = len(plan.echo_times_ms)
        self.signal = np.empty((n_echoes, n_slices, rows, columns), dtype=np.float32)
        self.signal[~plan.present] = np.nan
        self.n_negative = np.zeros((n_echoes, n_slices), dtype=np.int64)
        self.n_nonzero = np.zeros((n_echoes, n_slices), dtype=np.int64)
        self.means = np.full((n_echoes, n_slices), np.nan)
        self.tops: dict[tuple[int, int], NDArray[Any]] = {}


def load_dicom(plan: StackPlan) -> LoadedStack:
    """Load a plan of DICOM images; see `liverfe.acquire.load_stack`."""
    images = _headers(plan)
    target = _Target(plan)
    scales = settle_scaling(images)
    by_path: dict[Path, list[tuple[ImageHeader, SourceImage, tuple[float, float]]]] = {}
    for image, source, scale in zip(images, plan.sources, scales, strict=True):
        by_path.setdefault(image.path, []).append((image, source, scale))

    def read(path: Path) -> InputFile:
        data = path.read_bytes()
        wanted = by_path[path]
        check_unchanged(wanted[0][0], data)
        digest = hashlib.sha256(data).hexdigest()
        frames = stored_frames(wanted[0][0], data)
        for image, source, scale in wanted:
            _fill(target, image, source, frames[image.pixels.frame], scale)
        return InputFile(path=path, sha256=digest, n_bytes=len(data))

    with ThreadPoolExecutor(_N_THREADS) as pool:
        inputs = list(pool.map(read, by_path))
    findings = [*plan.findings, *_plausibility(plan, images[0], target)]
    stops = [f for f in findings if f.level == "stop" and f not in plan.findings]
    if stops:
        raise StudyRefused(*stops)
    assert plan.grid is not None
    stack = EchoStack(
        magnitude=echo_last(target.signal),
        echo_times_ms=np.array(plan.echo_times_ms),
        grid=plan.grid,
        present=plan.present,
        acquisition=plan.acquisition,
        subject=plan.subject,
        layout=plan.layout,
        left_out=plan.left_out,
        findings=tuple(findings),
    )
    return LoadedStack(stack=stack, inputs=tuple(sorted(inputs, key=lambda file: file.path)))


def _headers(plan: StackPlan) -> list[ImageHeader]:
    return [part for part in plan.parts if isinstance(part, ImageHeader)]


def _fill(
    target: _Target,
    image: ImageHeader,
    source: SourceImage,
    stored: NDArray[Any],
    scale: tuple[float, float],
) -> None:
    assert source.slice_index is not None
    cell = (source.echo, source.slice_index)
    check_bits(image, stored)
    signal = target.signal[cell]
    scale_into(signal, stored, *scale)
    if image.pixels.is_signed or scale[0] < 0 or scale[1] < 0:
        target.n_negative[cell] = np.count_nonzero(signal < 0)
    target.n_nonzero[cell] = signal.size
    target.means[cell] = signal.mean(dtype=np.float64)
    if source.echo < 2:
        target.tops[cell] = stored


def _plausibility(plan: StackPlan, image: ImageHeader, target: _Target) -> Iterable[Finding]:
    where = f"{image.series}, file {name_of(image)}"
    yield from check_sign(int(target.n_negative.sum()), int(target.n_nonzero.sum()), where=where)
    if len(plan.echo_times_ms) < 2:
        return
    is_whole = plan.present.all(axis=0)
    if is_whole.any():
        yield from check_order(target.means[:, is_whole].mean(axis=1).tolist(), where=where)
    first, second = (_top(target, echo) for echo in (0, 1))
    full_scale = float(bit_range(image.pixels)[1])
    yield from check_saturation(first, second, full_scale=full_scale, where=where)


def _top(target: _Target, echo: int) -> Brightest:
    """The top of all slices of one echo, in stored values."""
    stored = [values for (e, _), values in target.tops.items() if e == echo]
    highest = max(float(values.max()) for values in stored)
    counts = [brightest(values, highest) for values in stored]
    return Brightest(
        highest=highest,
        n_highest=sum(count.n_highest for count in counts),
        n_just_below=sum(count.n_just_below for count in counts),
        n_bright=sum(count.n_bright for count in counts),
    )
