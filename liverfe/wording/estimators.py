"""The words of each estimator of R2*, by its key.

The estimators themselves stand in `liverfe.fit`; a test holds the two lists against each other.
"""

from dataclasses import dataclass


@dataclass(frozen=True, slots=True, kw_only=True)
class EstimatorWording:
    """The words of one estimator.

    Attributes
    ----------
    algorithm : str
        What it does, as the sidecar of a map tells it.
    remark : str
        What a reader must know of its results; half a sentence that goes on after a colon.
    """

    algorithm: str
    remark: str


ESTIMATOR_WORDS: dict[str, EstimatorWording] = {
    "rician-ml": EstimatorWording(
        algorithm="Mono-exponential decay by Rician maximum likelihood in each voxel",
        remark="it takes account of the noise floor and reaches the precision that noise allows",
    ),
    "first-moment": EstimatorWording(
        algorithm="Mono-exponential decay fitted with the expected Rician magnitude",
        remark="it takes account of the noise floor and scatters 1 to 4 % more than noise demands",
    ),
    "weighted-first-moment": EstimatorWording(
        algorithm="Mono-exponential decay fitted with the expected Rician magnitude, "
        "weighted by its inverse variance",
        remark="it takes account of the noise floor and all but reaches the precision that noise "
        "allows",
    ),
    "second-moment": EstimatorWording(
        algorithm="Mono-exponential decay fitted to squared magnitudes with their noise offset",
        remark="it scatters half as much again at high R2*",
    ),
    "least-squares": EstimatorWording(
        algorithm="Mono-exponential decay by least squares, no noise correction",
        remark="it takes the noise floor for signal, so high iron reads low",
    ),
    "log-linear": EstimatorWording(
        algorithm="Straight line through the logarithm of the signal, no noise correction",
        remark="it takes the noise floor for signal: 30 mg/g may read 3",
    ),
    "weighted-log-linear": EstimatorWording(
        algorithm="Straight line through the logarithm of the signal, weighted by its square, "
        "no noise correction",
        remark="it takes the noise floor for signal, so high iron reads low",
    ),
    "iterated-log-linear": EstimatorWording(
        algorithm="Straight line through the logarithm of the signal, weighted by the square of "
        "the fit, no noise correction",
        remark="it does not take account of the noise floor, so very high iron reads low",
    ),
    "truncation": EstimatorWording(
        algorithm="Mono-exponential decay by least squares on echoes above the noise floor",
        remark="it reads very high iron low",
    ),
    "predicted-truncation": EstimatorWording(
        algorithm="Mono-exponential decay by least squares on echoes whose fitted signal is above "
        "the noise floor",
        remark="it reads very high iron low",
    ),
    "offset": EstimatorWording(
        algorithm="Mono-exponential decay with a constant offset by least squares",
        remark="it reads high iron too high",
    ),
    "autoregressive": EstimatorWording(
        algorithm="Mono-exponential decay from its integral over its fall by Simpson's rule, "
        "no noise correction",
        remark="it takes the noise floor for signal and its integral is not exact for fast decays, "
        "so high iron reads low",
    ),
}

ESTIMATOR_REMARKS = {key: words.remark for key, words in ESTIMATOR_WORDS.items()}
"""What a reader must know of each estimator's results."""
