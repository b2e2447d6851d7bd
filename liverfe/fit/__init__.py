"""Stack + noise -> `DecayFit`.

`signal` holds the equations, `kernels` the compiled loops, `bounds` what any estimator can reach;
`rician` is the estimator of the house, `comparators` holds those beside it, a file each.
"""

from liverfe.fit.bounds import (
    best_measured,
    clear_amplitude,
    n_clear_echoes,
    r2star_bound_per_s,
    r2star_shift_per_s,
    reportable_range,
    s0_relative_bound,
    upper_limit_per_s,
)
from liverfe.fit.decay import DecayFit, FitOutcome
from liverfe.fit.engine import LikelihoodFits, fit_decays
from liverfe.fit.estimate import ESTIMATORS, estimator_named, fit_r2star, fit_rows
from liverfe.fit.estimator import Estimator
from liverfe.fit.profile import profile_r2star
from liverfe.fit.rician import warm_up
from liverfe.fit.rows import DecayRows
from liverfe.fit.signal import amplitude, expected_magnitude, magnitude_variance, noise_floor
from liverfe.fit.signal_models import (
    SignalModel,
    fat_water_decay,
    mono_exponential,
    shaped_decay,
)

__all__ = [
    "ESTIMATORS",
    "DecayFit",
    "DecayRows",
    "Estimator",
    "FitOutcome",
    "LikelihoodFits",
    "SignalModel",
    "amplitude",
    "best_measured",
    "clear_amplitude",
    "estimator_named",
    "expected_magnitude",
    "fat_water_decay",
    "fit_decays",
    "fit_r2star",
    "fit_rows",
    "magnitude_variance",
    "mono_exponential",
    "n_clear_echoes",
    "noise_floor",
    "profile_r2star",
    "r2star_bound_per_s",
    "r2star_shift_per_s",
    "reportable_range",
    "s0_relative_bound",
    "shaped_decay",
    "upper_limit_per_s",
    "warm_up",
]
