"""What several tests of reading share: the one plan, the one object, and compression."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pydicom
from numpy.typing import NDArray
from pydicom.pixels import compress
from pydicom.uid import JPEG2000Lossless, JPEGLosslessSV1, JPEGLSLossless, RLELossless

from liverfe.acquire import StackPlan, find_stacks
from liverfe.echoes import EchoStack
from tests.acquire import dicom_study as made


def only_plan(folder: Path, **options: Any) -> StackPlan:
    survey = find_stacks([folder], **options)
    assert len(survey.stacks) == 1, [plan.layout for plan in survey.stacks]
    return survey.stacks[0]


def assert_is_the_object(stack: EchoStack, stored: NDArray[Any] | None = None) -> None:
    """Values exactly; affine by the definition in the standard."""
    wanted = made.expected_magnitude(made.stored_object() if stored is None else stored)
    np.testing.assert_array_equal(stack.magnitude, wanted)
    np.testing.assert_allclose(stack.echo_times_ms, made.ECHO_TIMES_MS, rtol=0, atol=1e-9)
    np.testing.assert_allclose(stack.grid.affine_mm, made.expected_affine(), rtol=0, atol=1e-5)
    assert stack.present is not None
    assert stack.present.all()


def squeeze(path: Path, syntax: Any) -> None:
    """Compress a file in place: RLE by pydicom, JPEG of all kinds by gdcm."""
    if syntax == RLELossless:
        dataset = pydicom.dcmread(path)
        compress(dataset, syntax, generate_instance_uid=False)
        made.save(dataset, path)
        return
    import gdcm

    kinds = {
        JPEGLosslessSV1: gdcm.TransferSyntax.JPEGLosslessProcess14_1,
        JPEG2000Lossless: gdcm.TransferSyntax.JPEG2000Lossless,
        JPEGLSLossless: gdcm.TransferSyntax.JPEGLSLossless,
    }
    reader = gdcm.ImageReader()
    reader.SetFileName(str(path))
    assert reader.Read()
    change = gdcm.ImageChangeTransferSyntax()
    change.SetTransferSyntax(gdcm.TransferSyntax(kinds[syntax]))
    change.SetInput(reader.GetImage())
    assert change.Change()
    writer = gdcm.ImageWriter()
    writer.SetFileName(str(path))
    writer.SetFile(reader.GetFile())
    writer.SetImage(change.GetOutput())
    assert writer.Write()
