"""Words that the study itself puts into its results."""

POOLED_LIVER = "liver regions pooled"
"""Name of the headline where several liver regions stand for the liver together."""
