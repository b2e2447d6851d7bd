"""The nouns of reading: what was found, what a stack would be made of, and what was read."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Literal

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes import Acquisition, EchoStack, LeftOut, Subject
from liverfe.errors import Finding
from liverfe.grid import Grid

if TYPE_CHECKING:
    from liverfe.acquire.dicom.header import ImageHeader
    from liverfe.acquire.nifti.volume import VolumePart

Verdict = Literal["usable", "repeat", "refused"]

Progress = Callable[[int, int], None]
"""Called with the number of files done and the number of all files."""

_MENDED_BY_ACQUIRING_AGAIN = frozenset(
    {"holes-in-echo-table", "no-complete-slice", "image-saturated", "coils-uncombined"}
)
"""Refusals that a technologist can mend: send the missing images, or scan once more."""


@dataclass(frozen=True, slots=True, kw_only=True)
class SourceImage:
    """One image of a plan and its place in the echo x slice table.

    Attributes
    ----------
    path : Path
        The file.
    frame : int
        Index of the frame in a multi-frame file, or of the volume in a 4-D file; else 0.
    echo : int
        Index of its echo time.
    slice_index : int or None
        Index of its slice along the grid's Z; None for a volume that holds all slices.
    """

    path: Path
    frame: int
    echo: int
    slice_index: int | None


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class StackPlan:
    """One acquisition as its headers tell it: which image goes where, and what speaks against it.

    Attributes
    ----------
    layout : str
        How the files are arranged, in words for the report.
    echo_times_ms : tuple of float
        Ascending, in ms; empty where the files state none.
    grid : Grid or None
        Where the voxels lie; None where the files do not say.
    shape : tuple of int or None
        X, Y, Z of the stack, also where there is no grid.
    present : ndarray of bool, shape (E, Z)
        The echo x slice completeness table.
    acquisition, subject : Acquisition, Subject
        How the images were made, and of whom.
    left_out : tuple of LeftOut
        Files of the same input that belong to no stack, and why.
    findings : tuple of Finding
        Doubts about this plan, the refusal among them.
    sources : tuple of SourceImage
        Every image with its place.
    refusal : Finding or None
        The first reason why this plan may not be used; None where it may.
    origin : {'dicom', 'nifti'}
        What kind of files it comes from.
    parts : tuple
        What `load_stack` needs of each image, in the order of `sources`.
    """

    layout: str
    echo_times_ms: tuple[float, ...]
    grid: Grid | None
    shape: tuple[int, int, int] | None
    present: NDArray[np.bool_]
    acquisition: Acquisition
    subject: Subject
    left_out: tuple[LeftOut, ...] = ()
    findings: tuple[Finding, ...] = ()
    sources: tuple[SourceImage, ...] = ()
    refusal: Finding | None = None
    origin: Literal["dicom", "nifti"] = "dicom"
    parts: tuple[ImageHeader, ...] | tuple[VolumePart, ...] = field(default=(), repr=False)

    def __post_init__(self) -> None:
        present = np.array(self.present, dtype=bool, copy=True)
        if present.ndim != 2:
            raise ValueError("present is a table of echoes x slices")
        present.flags.writeable = False
        object.__setattr__(self, "present", present)

    @property
    def verdict(self) -> Verdict:
        """`usable`, `repeat` (refused, but acquiring or sending again mends it) or `refused`."""
        stops = [finding for finding in self.findings if finding.level == "stop"]
        if self.refusal is None:
            return "usable"
        mendable = all(finding.code in _MENDED_BY_ACQUIRING_AGAIN for finding in stops)
        return "repeat" if mendable else "refused"

    @property
    def n_files(self) -> int:
        """Number of files that this plan uses."""
        return len({source.path for source in self.sources})


@dataclass(frozen=True, slots=True, kw_only=True)
class Survey:
    """What an input holds, from headers alone.

    Attributes
    ----------
    stacks : tuple of StackPlan
        One for each acquisition, usable or refused; usable ones first.
    left_out : tuple of LeftOut
        Everything that belongs to no stack, and why.
    findings : tuple of Finding
        Doubts about the input as a whole.
    """

    stacks: tuple[StackPlan, ...] = ()
    left_out: tuple[LeftOut, ...] = ()
    findings: tuple[Finding, ...] = ()

    @property
    def usable(self) -> tuple[StackPlan, ...]:
        """The plans that may be used as they are."""
        return tuple(plan for plan in self.stacks if plan.verdict == "usable")

    @property
    def verdict(self) -> Verdict:
        """The best verdict among the plans; `refused` where there is none."""
        verdicts = {plan.verdict for plan in self.stacks}
        if "usable" in verdicts:
            return "usable"
        return "repeat" if "repeat" in verdicts else "refused"


@dataclass(frozen=True, slots=True, kw_only=True)
class InputFile:
    """One file that was read, for the manifest.

    Attributes
    ----------
    path : Path
        Where it was.
    sha256 : str
        SHA-256 of its bytes, 64 hex digits; of the same bytes that were decoded.
    n_bytes : int
        Its size.
    """

    path: Path
    sha256: str
    n_bytes: int


@dataclass(frozen=True, slots=True, kw_only=True)
class LoadedStack:
    """A stack in true values and the files that it was read from.

    Attributes
    ----------
    stack : EchoStack
        The images.
    inputs : tuple of InputFile
        Every file that was read for it, sidecars among them, ordered by path.
    """

    stack: EchoStack
    inputs: tuple[InputFile, ...]
