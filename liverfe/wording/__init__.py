"""Every sentence that a reader sees stands here, once.

`caution` holds the words that each page and object with a LIC carries; `findings` the table of
all doubts that liverfe can raise, with cause, effect on LIC and remedy.
"""

from liverfe.wording.caution import CAUTION, CAUTION_SHORT
from liverfe.wording.findings import FINDING_TABLE, FindingWording

__all__ = ["CAUTION", "CAUTION_SHORT", "FINDING_TABLE", "FindingWording"]
