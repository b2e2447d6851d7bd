"""Stack + noise -> `DecayFit`.

`signal` holds the equations, `kernels` the compiled loops, `bounds` what any estimator can reach;
`rician` is the estimator of the house, `least_squares` and `log_linear` the plain ones beside it.
"""

from liverfe.fit.bounds import (
    best_measured,
    r2star_bound_per_s,
    r2star_shift_per_s,
    reportable_range,
    upper_limit_per_s,
)
from liverfe.fit.decay import DecayFit, FitOutcome
from liverfe.fit.estimate import ESTIMATORS, fit_r2star, fit_rows
from liverfe.fit.rows import DecayRows
from liverfe.fit.signal import amplitude, expected_magnitude, magnitude_variance, noise_floor

__all__ = [
    "ESTIMATORS",
    "DecayFit",
    "DecayRows",
    "FitOutcome",
    "amplitude",
    "best_measured",
    "expected_magnitude",
    "fit_r2star",
    "fit_rows",
    "magnitude_variance",
    "noise_floor",
    "r2star_bound_per_s",
    "r2star_shift_per_s",
    "reportable_range",
    "upper_limit_per_s",
]
