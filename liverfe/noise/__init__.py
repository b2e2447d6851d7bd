"""Stack -> `NoiseLevel`: from background air, from residuals, and a rule that chooses."""

from liverfe.noise.level import NoiseCandidate, NoiseLevel

__all__ = ["NoiseCandidate", "NoiseLevel"]
