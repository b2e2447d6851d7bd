"""The phantom as classic single-frame MR images, in layouts that scanners and archives leave."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from pydicom.dataelem import DataElement
from pydicom.dataset import Dataset
from pydicom.encaps import encapsulate
from pydicom.pixels.encoders.base import RLELosslessEncoder
from pydicom.uid import UID, ExplicitVRLittleEndian, ImplicitVRLittleEndian, RLELossless

from liverfe.errors import UsageError
from liverfe.phantom.dicom_header import Frame, describe_frame, describe_study, phase_counts
from liverfe.phantom.make import Phantom, scan_again

__all__ = ["DICOM_LAYOUTS", "TRANSFER_SYNTAXES", "write_dicom"]

DICOM_LAYOUTS: dict[str, str] = {
    "one-series": "all echoes in one series, files in shuffled order",
    "series-per-echo": "each echo a series and folder of its own",
    "with-phase": "magnitude and phase images mixed in one series, files in shuffled order",
    "repeats": "the acquisition twice in one series, told apart by AcquisitionNumber",
}
"""Layouts of a DICOM study, and what they are."""

TRANSFER_SYNTAXES: dict[str, UID] = {
    "explicit-le": ExplicitVRLittleEndian,
    "implicit-le": ImplicitVRLittleEndian,
    "rle": RLELossless,
}
"""Transfer syntaxes that can be written."""


def write_dicom(
    phantom: Phantom,
    folder: Path,
    *,
    layout: str = "one-series",
    transfer_syntax: str = "explicit-le",
) -> list[Path]:
    """Write a phantom as DICOM files.

    Parameters
    ----------
    phantom : Phantom
        For ``with-phase`` it must have been made with its phase.
    folder : Path
        Made if it is not there.
    layout : str
        A key of `DICOM_LAYOUTS`.
    transfer_syntax : str
        A key of `TRANSFER_SYNTAXES`.

    Returns
    -------
    list of Path
        The files, sorted by name. Same phantom and options, same bytes.

    Raises
    ------
    UsageError
        If layout or transfer syntax is unknown, or the phantom has no phase to write.
    """
    if layout not in DICOM_LAYOUTS:
        raise UsageError(f"--layout {layout}: for DICOM use one of {', '.join(DICOM_LAYOUTS)}")
    if transfer_syntax not in TRANSFER_SYNTAXES:
        known = ", ".join(TRANSFER_SYNTAXES)
        raise UsageError(f"transfer syntax {transfer_syntax}: use one of {known}")
    if layout == "with-phase" and phantom.phase_rad is None:
        raise UsageError("layout with-phase: make the phantom with its phase")
    runs = [phantom]
    if layout == "repeats":
        # The second run's chance follows from the recipe's seed, as everything in a file does.
        runs.append(scan_again(phantom, np.random.default_rng([phantom.recipe.seed, 1])))
    syntax = TRANSFER_SYNTAXES[transfer_syntax]
    uid_layout = _uid_layout(layout, transfer_syntax)
    dataset = describe_study(phantom, layout=uid_layout, transfer_syntax=syntax)
    paths = []
    for frame, path in _plan(phantom, folder, layout):
        path.parent.mkdir(parents=True, exist_ok=True)
        describe_frame(dataset, phantom, frame, layout=uid_layout)
        _put_pixels(dataset, _counts(runs[frame.run], frame), syntax)
        dataset.save_as(path, enforce_file_format=True)
        paths.append(path)
    return sorted(paths)


def frame_of_reference_uid(phantom: Phantom, *, layout: str, transfer_syntax: str) -> str:
    """Name the frame of reference (0020,0052) that `write_dicom` gives these images."""
    return phantom.uid(_uid_layout(layout, transfer_syntax), "frame of reference")


def _uid_layout(layout: str, transfer_syntax: str) -> str:
    """One object in two layouts is two studies: their UIDs differ."""
    return f"{layout} {transfer_syntax}"


def _plan(phantom: Phantom, folder: Path, layout: str) -> Iterator[tuple[Frame, Path]]:
    """Say which image goes into which file."""
    n_slices, n_echoes = phantom.grid.shape[2], len(phantom.recipe.echo_times_ms)
    components = "MP" if layout == "with-phase" else "M"
    frames = []
    counters: dict[int, int] = {}
    for run in range(2 if layout == "repeats" else 1):
        for k in range(n_slices):
            for echo in range(n_echoes):
                for component in components:
                    series = echo + 1 if layout == "series-per-echo" else 1
                    counters[series] = counters.get(series, 0) + 1
                    frames.append(
                        Frame(
                            component=component,
                            run=run,
                            echo=echo,
                            slice_index=k,
                            series=series,
                            instance=counters[series],
                        )
                    )
    if layout == "series-per-echo":
        for frame in frames:
            yield frame, folder / f"series-{frame.series:03d}" / f"image-{frame.instance:05d}.dcm"
        return
    order = np.random.default_rng([phantom.recipe.seed, 2]).permutation(len(frames))
    for frame, place in zip(frames, order, strict=True):
        yield frame, folder / f"image-{place + 1:05d}.dcm"


def _counts(phantom: Phantom, frame: Frame) -> NDArray[np.uint16]:
    """Stored values of one image, rows down and columns across."""
    index = (slice(None), slice(None), frame.slice_index, frame.echo)
    if frame.component == "P":
        assert phantom.phase_rad is not None
        return np.ascontiguousarray(phase_counts(phantom.phase_rad[index]).T)
    return np.ascontiguousarray(phantom.stored[index].T)


def _put_pixels(dataset: Dataset, counts: NDArray[np.uint16], syntax: UID) -> None:
    raw = counts.astype("<u2", copy=False).tobytes()
    if not syntax.is_compressed:
        dataset["PixelData"] = DataElement("PixelData", "OW", raw)
        return
    # RLE is the one compressed syntax in the table above.
    encoded = RLELosslessEncoder.encode(
        raw,
        rows=dataset.Rows,
        columns=dataset.Columns,
        samples_per_pixel=1,
        number_of_frames=1,
        bits_allocated=16,
        bits_stored=dataset.BitsStored,
        photometric_interpretation="MONOCHROME2",
        pixel_representation=0,
        encoding_plugin="pydicom",
    )
    dataset["PixelData"] = DataElement(
        "PixelData", "OB", encapsulate([encoded]), is_undefined_length=True
    )
