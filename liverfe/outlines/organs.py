"""Which organ a region's name says it is.

Regions count as liver unless their name says another organ or tissue: those get R2* and no LIC.
"""

from __future__ import annotations

import re
import unicodedata

_ORGAN_WORDS: dict[str, tuple[str, ...]] = {
    "spleen": ("spleen", "splenic", "milz", "rate", "bazo", "milza"),
    "muscle": (
        "muscle", "paraspinal", "psoas", "erector", "muskel", "muskulatur", "musculo", "muscolo",
    ),
    "vessel": (
        "vessel", "vein", "artery", "arteries", "aorta", "vena", "portal", "cava", "ivc", "blood",
        "gefass", "gefasse", "gefaess", "vene", "vaisseau", "vaisseaux", "vaso", "vasi",
    ),
    "fat": ("fat", "adipose", "subcutaneous", "fett", "graisse", "grasa", "grasso"),
    "kidney": ("kidney", "renal", "cortex", "medulla", "niere", "nieren", "rein", "rinon", "rene"),
    "pancreas": (
        "pancreas", "pancreatic", "pankreas", "bauchspeicheldruse", "bauchspeicheldruese",
    ),
    "heart": ("heart", "myocardium", "septum", "cardiac", "herz", "coeur", "cuore", "corazon"),
    "marrow": ("marrow", "vertebra", "vertebrae", "vertebral", "bone", "spine"),
    "gallbladder": ("gallbladder", "gall", "bile"),
    "lung": ("lung",),
    "lesion": (
        "lesion", "cyst", "tumour", "tumor", "haemangioma", "hemangioma", "metastasis",
        "metastases", "hcc", "abscess",
    ),
    "background": ("background", "air", "noise", "hintergrund", "luft", "fond", "fondo", "aire"),
    "phantom": ("vial", "tube", "phantom"),
}  # fmt: skip
"""English, with plurals in s, and the plain words of German, French, Italian and Spanish."""

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
    words = re.split(r"[^a-z]+", _plain(name).replace("w/o", "without"))
    for stop in _WITHOUT:
        if stop in words:
            words = words[: words.index(stop)]
    told = {*words, *(word.removesuffix("s") for word in words)}
    organ = next((o for o, names in _ORGAN_WORDS.items() if told & set(names)), "liver")
    return "other" if organ == "liver" and told & {"non", "not"} else organ


def _plain(name: str) -> str:
    """Lower case without accents: ``Gefäß`` reads ``gefass``."""
    parted = unicodedata.normalize("NFKD", name.lower().replace("ß", "ss"))
    return "".join(char for char in parted if not unicodedata.combining(char))


def is_whole_liver(name: str) -> bool:
    """Tell whether a region's name says that it is the liver as a whole."""
    words = [word for word in re.split(r"[^a-z]+", _plain(name)) if word]
    return words in (["liver"], ["whole", "liver"])
