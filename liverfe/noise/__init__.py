"""Stack -> `NoiseLevel`: from background air, from residuals, and a rule that chooses."""

from liverfe.noise.air import sigma_from_air
from liverfe.noise.ceiling import sigma_ceiling
from liverfe.noise.estimate import estimate_noise
from liverfe.noise.level import NoiseCandidate, NoiseLevel
from liverfe.noise.residual import sigma_from_residuals

__all__ = [
    "NoiseCandidate",
    "NoiseLevel",
    "estimate_noise",
    "sigma_ceiling",
    "sigma_from_air",
    "sigma_from_residuals",
]
