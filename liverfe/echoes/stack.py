"""`EchoStack`: the magnitude images of one acquisition, ordered by echo time."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from liverfe.echoes.acquisition import Acquisition, LeftOut, Subject
from liverfe.errors import Finding
from liverfe.grid import Grid


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class EchoStack:
    """Magnitude images of all echoes of one acquisition, in true values.

    Attributes
    ----------
    magnitude : ndarray of float32, shape (X, Y, Z, E)
        Signal after rescaling, each frame scaled once; NaN where an image is missing.
    echo_times_ms : ndarray of float64, shape (E,)
        Strictly ascending, in ms.
    grid : Grid
        Where the voxels lie.
    present : ndarray of bool, shape (E, Z)
        The echo x slice completeness table: False where an image is missing.
    acquisition : Acquisition
        How the images were made.
    subject : Subject
        Whose they are.
    layout : str
        How the files were arranged, in words for the report.
    left_out : tuple of LeftOut
        What was read and not used, and why.
    findings : tuple of Finding
        Doubts and corrections from reading; ``stop`` findings never get this far.
    """

    magnitude: NDArray[np.float32]
    echo_times_ms: NDArray[np.float64]
    grid: Grid
    present: NDArray[np.bool_] | None = None
    acquisition: Acquisition = field(default_factory=Acquisition)
    subject: Subject = field(default_factory=Subject)
    layout: str = ""
    left_out: tuple[LeftOut, ...] = ()
    findings: tuple[Finding, ...] = ()

    def __post_init__(self) -> None:
        times = np.array(self.echo_times_ms, dtype=np.float64, copy=True)
        if times.ndim != 1 or len(times) < 1 or not np.isfinite(times).all() or times[0] <= 0:
            raise ValueError("echo_times_ms must be a row of positive numbers")
        if (np.diff(times) <= 0).any():
            raise ValueError("echo_times_ms must ascend strictly")
        # A copy, so that the caller's array stays writeable and ours cannot change behind our back.
        signal = np.array(self.magnitude, dtype=np.float32, order="C", copy=True)
        if signal.shape != (*self.grid.shape, len(times)):
            raise ValueError(
                f"magnitude of shape {signal.shape} on a grid of shape {self.grid.shape} "
                f"with {len(times)} echo times"
            )
        n_slices = self.grid.shape[2]
        present = (
            np.ones((len(times), n_slices), dtype=bool)
            if self.present is None
            else np.array(self.present, dtype=bool, copy=True)
        )
        if present.shape != (len(times), n_slices):
            raise ValueError(f"present of shape {present.shape}, not {(len(times), n_slices)}")
        for array in (times, signal, present):
            array.flags.writeable = False
        object.__setattr__(self, "echo_times_ms", times)
        object.__setattr__(self, "magnitude", signal)
        object.__setattr__(self, "present", present)

    @property
    def n_echoes(self) -> int:
        """Number of echoes."""
        return len(self.echo_times_ms)

    @property
    def complete_slices(self) -> NDArray[np.bool_]:
        """Which slices have an image at every echo time; bool, shape (Z,)."""
        assert self.present is not None
        return np.asarray(self.present.all(axis=0))
