"""From stored values to true values: the one place where an image is scaled.

Rescale slope RS and intercept RI give displayed values D = R RS + RI. Philips' private scale
slope SS gives precise values P = D / (RS SS), which are on one scale for all images of an
examination; that matters only where RS differs between images of one stack (standards sheet 1.3;
Chenevert 2014, secondary).
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from liverfe.acquire.dicom.header import ImageHeader, Scaling


def uses_precise_scaling(images: Sequence[ImageHeader]) -> bool:
    """Tell whether display scales differ and the maker's precise scale takes their place."""
    scalings = [image.scaling for image in images]
    differs = len({(scaling.slope, scaling.intercept) for scaling in scalings}) > 1
    return differs and all(scaling.precise_slope for scaling in scalings)


def settle_scaling(images: Sequence[ImageHeader]) -> list[tuple[float, float]]:
    """Settle slope and intercept of every image of a stack.

    Parameters
    ----------
    images : sequence of ImageHeader
        All images of one stack.

    Returns
    -------
    list of (float, float)
        True value = stored x slope + intercept; precise values where the rescale slopes differ
        and every image states a private scale slope, else displayed values.
    """
    scalings = [image.scaling for image in images]
    if uses_precise_scaling(images):
        return [_precise(scaling) for scaling in scalings]
    return [(scaling.slope, scaling.intercept) for scaling in scalings]


def _precise(scaling: Scaling) -> tuple[float, float]:
    assert scaling.precise_slope is not None
    return 1.0 / scaling.precise_slope, scaling.intercept / (scaling.slope * scaling.precise_slope)


def scale_into(
    target: NDArray[np.float32], stored: NDArray[Any], slope: float, intercept: float
) -> None:
    """Write true values of one image into `target`, computed in double precision."""
    if slope == 1.0 and intercept == 0.0:
        target[...] = stored
        return
    values = stored.astype(np.float64)
    values *= slope
    values += intercept
    target[...] = values
