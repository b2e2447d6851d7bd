"""Words that the study itself puts into its results."""

POOLED_LIVER = "liver regions pooled"
"""Name of the headline where several liver regions stand for the liver together."""

ESTIMATOR_REMARKS: dict[str, str] = {
    "second-moment": "it scatters half as much again at high R2*",
    "least-squares": "it takes the noise floor for signal, so high iron reads low",
    "log-linear": "it takes the noise floor for signal: 30 mg/g may read 3",
    "weighted-log-linear": "it takes the noise floor for signal, so high iron reads low",
    "truncation": "it reads very high iron low",
    "offset": "it reads high iron too high",
}
"""Why an estimator is no estimator for a report; the accurate ones are missing on purpose."""
