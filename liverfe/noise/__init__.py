"""Stack -> `NoiseLevel`: from background air or tissue, and a rule that chooses.

`air` reads the background; `residual` compares voxels of one tissue where they are bright,
`dark_tissue` and `straightness` where they are dark, `variation` from place to place; `joint`
weighs whole decays by their likelihood; `tissue` asks these in turn; `estimate` is the rule.
"""

from liverfe.noise.air import sigma_from_air
from liverfe.noise.ceiling import sigma_ceiling
from liverfe.noise.estimate import estimate_noise
from liverfe.noise.joint import DecayLikelihood
from liverfe.noise.level import NoiseCandidate, NoiseLevel
from liverfe.noise.residual import sigma_from_residuals

__all__ = [
    "DecayLikelihood",
    "NoiseCandidate",
    "NoiseLevel",
    "estimate_noise",
    "sigma_ceiling",
    "sigma_from_air",
    "sigma_from_residuals",
]
