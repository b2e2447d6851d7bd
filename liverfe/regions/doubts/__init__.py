"""Does a region decay with one exponential? One file a kind of doubt.

`falling` refuses what cannot be a decay. `misfit` pools the residuals of a region's voxels; each
`Suspect` (`echoes`, `fat`, `bends`, `order`) is taken out of the signal on trial; `tell` chooses
the best by AICc and says what it does to R2*; `generic` holds misfits that nothing explains.
"""

from liverfe.regions.doubts.falling import check_decay
from liverfe.regions.doubts.tell import DecayCheck, examine_decay

__all__ = ["DecayCheck", "check_decay", "examine_decay"]
