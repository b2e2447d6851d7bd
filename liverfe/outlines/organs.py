"""Which organ a region's name says it is.

Regions count as liver unless their name says another organ or tissue: those get R2* and no LIC.
"""

from __future__ import annotations

import re

_ORGAN_WORDS: dict[str, tuple[str, ...]] = {
    "spleen": ("spleen", "splenic"),
    "muscle": ("muscle", "paraspinal", "psoas", "erector"),
    "vessel": (
        "vessel", "vein", "artery", "arteries", "aorta", "vena", "portal", "cava", "ivc", "blood",
    ),
    "fat": ("fat", "adipose", "subcutaneous"),
    "kidney": ("kidney", "renal", "cortex", "medulla"),
    "pancreas": ("pancreas", "pancreatic"),
    "heart": ("heart", "myocardium", "septum", "cardiac"),
    "marrow": ("marrow", "vertebra", "vertebrae", "vertebral", "bone", "spine"),
    "gallbladder": ("gallbladder", "gall", "bile"),
    "lung": ("lung",),
    "lesion": (
        "lesion", "cyst", "tumour", "tumor", "haemangioma", "hemangioma", "metastasis",
        "metastases", "hcc", "abscess",
    ),
    "background": ("background", "air", "noise"),
    "phantom": ("vial", "tube", "phantom"),
}  # fmt: skip
"""Plurals with s are understood."""

_WITHOUT = ("without", "minus", "excluding", "excl", "except", "avoiding", "avoid", "sparing", "no")
"""What follows these is what the region leaves out."""


def organ_from_name(name: str) -> str:
    """Tell the organ or tissue that a region's name says.

    Parameters
    ----------
    name : str
        A region's name in any case, words parted by spaces, hyphens, underscores or digits.

    Returns
    -------
    str
        ``liver`` unless a word of the name is another organ or tissue. ``hepatic vein`` is a
        vessel; ``liver without vessels`` is liver, since what follows *without* is left out; ``not
        liver`` is ``other``.
    """
    words = re.split(r"[^a-z]+", name.lower().replace("w/o", "without"))
    for stop in _WITHOUT:
        if stop in words:
            words = words[: words.index(stop)]
    told = {*words, *(word.removesuffix("s") for word in words)}
    organ = next((o for o, names in _ORGAN_WORDS.items() if told & set(names)), "liver")
    return "other" if organ == "liver" and told & {"non", "not"} else organ


def is_whole_liver(name: str) -> bool:
    """Tell whether a region's name says that it is the liver as a whole."""
    words = [word for word in re.split(r"[^a-z]+", name.lower()) if word]
    return words in (["liver"], ["whole", "liver"])
