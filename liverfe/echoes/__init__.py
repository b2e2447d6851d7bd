"""`EchoStack`, the images of one study ordered by echo time, and what its numbers alone reveal."""

from liverfe.echoes.acquisition import Acquisition, LeftOut, Subject
from liverfe.echoes.discretion import naming_pattern
from liverfe.echoes.field import settle_field_strength
from liverfe.echoes.stack import EchoStack

__all__ = [
    "Acquisition",
    "EchoStack",
    "LeftOut",
    "Subject",
    "naming_pattern",
    "settle_field_strength",
]
