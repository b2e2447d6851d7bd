"""The estimators beside the house's, one file each, under their trade names.

Each file defines one `liverfe.fit.estimator.Estimator`; the files with an underscore hold the
compiled loops that several share. A new one is a file here, a line in `COMPARATORS`, and its words
in `liverfe.wording.estimators`.
"""

from __future__ import annotations

from liverfe.fit.comparators import (
    autoregressive,
    first_moment,
    iterated_log_linear,
    least_squares,
    log_linear,
    offset,
    predicted_truncation,
    second_moment,
    truncation,
    weighted_first_moment,
    weighted_log_linear,
)

COMPARATORS = (
    first_moment.ESTIMATOR,
    weighted_first_moment.ESTIMATOR,
    second_moment.ESTIMATOR,
    least_squares.ESTIMATOR,
    log_linear.ESTIMATOR,
    weighted_log_linear.ESTIMATOR,
    iterated_log_linear.ESTIMATOR,
    truncation.ESTIMATOR,
    predicted_truncation.ESTIMATOR,
    offset.ESTIMATOR,
    autoregressive.ESTIMATOR,
)
"""All of them, the accurate ones first."""
