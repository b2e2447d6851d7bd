"""`Estimator`: one way of fitting R2*, as the registry lists it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from liverfe.fit.rows import DecayRows

FitRows = Callable[
    [
        NDArray[np.float32],
        NDArray[np.float64],
        NDArray[np.float64],
        int,
        NDArray[np.bool_] | None,
    ],
    DecayRows,
]
"""``fit(signal, echo_times_ms, sigma, n, usable)``: the arguments of `liverfe.fit.fit_rows`."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Estimator:
    """One estimator of R2*; its words for readers stand in `liverfe.wording.estimators`.

    Attributes
    ----------
    key : str
        Its trade name, as ``model=`` and the method file take it.
    fit : callable
        ``fit(signal, echo_times_ms, sigma, n, usable)``, arguments as in `liverfe.fit.fit_rows`,
        to `DecayRows`. A comparator fills in R2*, S0 and outcome only.
    noise_handling : {'corrected', 'truncation', 'offset', 'none'}
        How it treats the noise floor; calibration curves state theirs in the same words.
    is_for_reports : bool
        Whether a result may rest on it; else it is there for comparison and says so.
    citations : tuple of str
        Keys of the papers behind it (`liverfe.sources`); empty for a textbook method.
    """

    key: str
    fit: FitRows
    noise_handling: Literal["corrected", "truncation", "offset", "none"]
    is_for_reports: bool = False
    citations: tuple[str, ...] = ()
