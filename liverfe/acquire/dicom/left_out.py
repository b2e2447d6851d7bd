"""Which images are no magnitude echo, and what the list of what was left out says of them."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from pathlib import Path

from liverfe.acquire.dicom.components import is_derived
from liverfe.acquire.dicom.header import ImageHeader, Kind
from liverfe.echoes import LeftOut

_WHY: dict[Kind, tuple[str, str]] = {
    "phase": ("phase images", "only magnitude decays as R2* says"),
    "real": ("real images", "only magnitude decays as R2* says"),
    "imaginary": ("imaginary images", "only magnitude decays as R2* says"),
    "mixed": ("images of mixed components", "the file does not say which values are magnitude"),
    "derived": ("derived images", "they were computed from echoes and are none themselves"),
    "mosaic": ("mosaic images", "several slices in one image are not supported"),
}


def set_aside(images: Sequence[ImageHeader]) -> tuple[list[ImageHeader], list[LeftOut]]:
    """Set aside every image that is no magnitude echo.

    Images marked DERIVED are used only where a series has no other magnitude, since some systems
    mark what they merely corrected.

    Parameters
    ----------
    images : sequence of ImageHeader
        Of one study.

    Returns
    -------
    magnitude : list of ImageHeader
        What may be an echo.
    left_out : list of LeftOut
        One entry for each kind and series.
    """
    kept = [image for image in images if image.kind in ("magnitude", "unknown")]
    aside: dict[tuple[Kind, str], set[Path]] = {}
    for image in images:
        if image.kind in _WHY:
            aside.setdefault((image.kind, image.series), set()).add(image.path)
    originals = {image.series_uid for image in kept if not is_derived(image.image_type)}
    magnitude = []
    for image in kept:
        if is_derived(image.image_type) and image.series_uid in originals:
            aside.setdefault(("derived", image.series), set()).add(image.path)
        else:
            magnitude.append(image)
    left_out = [
        LeftOut(what=f"{_WHY[kind][0]} of {series}", n_files=len(paths), why=_WHY[kind][1])
        for (kind, series), paths in aside.items()
    ]
    return magnitude, left_out


def tally(reasons: Sequence[tuple[str, str]]) -> list[LeftOut]:
    """Count files that were left out for the same reason.

    Parameters
    ----------
    reasons : sequence of (str, str)
        What the file is, and why it is left out.

    Returns
    -------
    list of LeftOut
        One for each pair.
    """
    return [LeftOut(what=what, n_files=n, why=why) for (what, why), n in Counter(reasons).items()]
