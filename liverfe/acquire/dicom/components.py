"""Magnitude, phase, real, imaginary or derived: what the numbers of an image are.

Sources, in the order in which they are believed: (0008,9208) ComplexImageComponent; GE's private
(0043,xx2F); Philips' private (2005,xx11); the values of (0008,0008) ImageType from the third on
(Siemens: M, P, R, I; Philips: M_FFE, PHASE MAP, ...). Only magnitude decays as R2* says.
"""

from __future__ import annotations

from liverfe.acquire.dicom import tags
from liverfe.acquire.dicom.elements import Elements, private, text, whole
from liverfe.acquire.dicom.header import Kind

_STANDARD: dict[str, Kind] = {
    "MAGNITUDE": "magnitude",
    "PHASE": "phase",
    "REAL": "real",
    "IMAGINARY": "imaginary",
    "MIXED": "mixed",
}

_GE: dict[int, Kind] = {0: "magnitude", 1: "phase", 2: "real", 3: "imaginary"}
"""(0043,xx2F); secondary."""

_LETTERS: dict[str, Kind] = {"M": "magnitude", "P": "phase", "R": "real", "I": "imaginary"}

_WORDS: dict[str, Kind] = {
    **_LETTERS,
    "MAGNITUDE": "magnitude",
    "PHASE": "phase",
    "PHASE MAP": "phase",
    "PHASE MAP SUBTRACTED": "phase",
    "VELOCITY MAP": "phase",
    "REAL": "real",
    "IMAGINARY": "imaginary",
    "MIXED": "mixed",
}

_PHILIPS_SEQUENCES = ("FFE", "SE", "IR", "TSE", "EPI")
"""What follows the component letter in tokens like M_FFE."""

_COMBINED = frozenset(
    "MEAN RMS SOS SUM AVERAGE MEDIAN ADD MIP MINIP MPR PROJECTION SUBTRACTION SUBTRACT DIFFERENCE "
    "T1 T2 T2* T2STAR T2_STAR T2_STAR_MAP R2 R2* R2STAR R2_STAR MAP ADC WATER FAT W F IP OP "
    "FAT_FRACTION FATFRAC FF PDFF WATER_FRACTION S0 SWI".split()
)
"""Tokens of images that were computed from echoes and are none themselves."""

_MOSAICS = frozenset({"MOSAIC", "VFRAME"})

FILTERED = frozenset({"FIL", "FILTERED", "DENOISED", "SMOOTHED"})
"""Tokens of images whose noise is no longer that of the acquisition."""


def image_kind(elements: Elements, image_type: tuple[str, ...], component: str = "") -> Kind:
    """Tell what the numbers of an image are.

    Parameters
    ----------
    elements : Elements
        The header, for the private elements.
    image_type : tuple of str
        (0008,0008) ImageType or (0008,9007) FrameType.
    component : str
        (0008,9208) ComplexImageComponent; empty if absent.

    Returns
    -------
    str
        The kind; ``unknown`` where the file does not say.
    """
    tokens = [token.strip().upper() for token in image_type]
    if _MOSAICS & set(tokens):
        return "mosaic"
    kind = _component(elements, tokens, component)
    if kind in ("phase", "real", "imaginary", "mixed"):
        return kind
    # An enhanced frame states T1, T2, ... as its contrast, not as a map: the component decides.
    if is_combined(tokens, is_frame_type=bool(component)):
        return "derived"
    return kind


def is_combined(tokens: list[str], *, is_frame_type: bool = False) -> bool:
    """Tell whether the tokens of an image type name an image computed from others."""
    contrasts = {"T1", "T2", "T2_STAR", "T2*", "T2STAR"} if is_frame_type else set()
    if "DERIVED" in tokens[:1]:
        contrasts = set()
    return bool((_COMBINED - contrasts) & set(tokens[2:]))


def is_derived(image_type: tuple[str, ...]) -> bool:
    """Tell whether an image is marked as made from other images."""
    return bool(image_type) and image_type[0].strip().upper() == "DERIVED"


def _component(elements: Elements, tokens: list[str], component: str) -> Kind:
    named = _named(tokens)
    if component.upper() in _STANDARD:
        standard = _STANDARD[component.upper()]
        # Where component and image type contradict each other neither is believed.
        return "unknown" if named not in ("unknown", standard) else standard
    ge = private(elements, 0x0043, 0x2F, tags.GE_PARAMETERS)
    if ge is not None and (code := whole(elements, ge, binary="SS")) in _GE:
        return _GE[code]
    philips = private(elements, 0x2005, 0x11, tags.PHILIPS)
    if philips is not None and (letter := text(elements, philips).upper()) in _LETTERS:
        return _LETTERS[letter]
    return named


def _named(tokens: list[str]) -> Kind:
    """The kind that a token of the image type names."""
    for token in tokens[2:]:
        if token in _WORDS:
            return _WORDS[token]
        letter, _, rest = token.partition("_")
        if letter in _LETTERS and rest in _PHILIPS_SEQUENCES:
            return _LETTERS[letter]
    return "unknown"
