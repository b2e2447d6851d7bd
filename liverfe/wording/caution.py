"""The caution: what every page, file and object that shows a LIC must say."""

CAUTION = (
    "Not for sole diagnosis. Not a medical device. To be read together with the clinical findings "
    "by licensed practitioners under local rules."
)
"""The whole caution, one sentence after the other; printed on every page of the report."""

CAUTION_SHORT = "Not for sole diagnosis. Not a medical device."
"""The same where there is room for one line only."""
