"""Stack + noise -> `DecayFit`."""

from liverfe.fit.decay import DecayFit, FitOutcome

__all__ = ["DecayFit", "FitOutcome"]
