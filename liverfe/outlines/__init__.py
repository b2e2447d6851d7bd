"""Regions in patient millimetres: outlines and label sets, rasterised once on a `Grid`.

This room knows no files; reading and writing region files is `liverfe.acquire`'s and
`liverfe.export`'s work.
"""

from liverfe.outlines.organs import is_whole_liver, organ_from_name
from liverfe.outlines.rasterise import rasterise
from liverfe.outlines.region import LabelMask, Outline, Region

__all__ = ["LabelMask", "Outline", "Region", "is_whole_liver", "organ_from_name", "rasterise"]
