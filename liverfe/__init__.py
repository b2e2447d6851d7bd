"""liverfe: from multi-echo gradient-echo MRI to a liver iron concentration that may be trusted.

The package reads as the data's journey. Each room takes one noun and gives the next; a room
imports only from rooms above it in this list (the order is a contract, see `pyproject.toml`).

=============  ====================================================================================
room           takes -> gives
=============  ====================================================================================
wording        every sentence that a reader sees, the caution among them, once
errors         the one error tree, and `Finding`: doubt as data
units          the only conversions, and UCUM codes
sources        literature references by key, from the package's own ``references.bib``
grid           `Grid`: shape, ``affine_mm`` (RAS+), slice geometry
outlines       `Region`: outlines and label sets in patient millimetres, rasterised once on a `Grid`
echoes         `EchoStack`, and what its numbers alone reveal
noise          stack -> `NoiseLevel`
fit            stack + noise -> `DecayFit`
maps           fit -> `DecayMaps`: each voxel judged
regions        outlines + maps -> `RegionSummary`
calibration    summary -> `IronEstimate`: published curves, bands, a site's own curve
study          stack + regions + `Method` -> `StudyResult`: the whole science in one function
acquire        files -> `EchoStack` and `Region`
phantom        recipe -> files with known truth (never imports the estimator)
report         result -> PDF
export         result -> NIfTI/BIDS, CSV, JSON, manifest
journey        one study, files in -> result folder out
batch          a folder of studies -> a folder of results, resumable
cli            arguments -> one call
=============  ====================================================================================
"""

__version__ = "0.1.0"
"""The version of this package; it stands in every result."""
