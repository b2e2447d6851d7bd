"""Sentences of the exported files, and of what can go wrong while they are written."""

WITHHELD = "(withheld)"
"""Stands where a text from outside held a patient's name, number or birth date."""

MAP_DESCRIPTIONS = {
    "r2star": "R2* in 1/s. NaN where it was not measured; the status map says why.",
    "t2star": "T2* in s, the inverse of the R2* map. NaN where R2* was not measured.",
    "s0": "Signal at echo time zero in the scanner's own units. NaN where R2* was not measured.",
    "r2star_se": "Standard error of each voxel's R2* in 1/s, from the Fisher information.",
    "misfit": "Misfit over its expectation (reduced chi-squared): about 1 where the model holds.",
    "lic": (
        "Liver iron concentration in mg iron per g dry weight, from the R2* map and the named "
        "calibration curve. Only meaningful inside the liver. {caution}"
    ),
    "status": "What may be said of each voxel; the table beside it names the values.",
    "rois": (
        "Regions as they were measured, before trimming. Where regions overlap, the smaller one "
        "lies on top; the table counts all voxels of a region and those that show here."
    ),
}
"""What each map holds, by its key; `{caution}` is filled in."""

STATUS_NAMES = {
    "OUTSIDE": "outside: no signal or not all echoes",
    "MEASURED": "measured",
    "OVER_LIMIT": "over the limit: decays faster than this scan can resolve",
    "UNDER_LIMIT": "under the limit: decay too slow to tell from none",
    "FAILED": "failed: the fit did not converge",
}
"""Names of voxel states in the table beside the status map, by `VoxelStatus` name."""

DATASET_NAME = "R2* and liver iron maps"
"""Name of a BIDS data set made of exported maps."""

DATASET_README = """\
Maps of R2*, T2* and S0 from multi-echo gradient-echo MRI of the abdomen, one subject a study key.

BIDS has no suffix for a liver iron concentration, for the standard error of R2* or for a misfit.
Those maps bear suffixes of their own (LICmap, R2starSEmap, misfitmap), listed in .bidsignore,
so that no program takes them for an R2* map.

{caution}
"""
"""README of a BIDS data set made of exported maps; `{caution}` is filled in."""

DISK_FULL = (
    "output folder {name}: no space left on the disk (or the quota is used up). Nothing of this "
    "result was kept. Free some space or choose another --out, then run again."
)
NOT_ALLOWED = (
    "output folder {name}: writing is not permitted, or a file in it is open in another program. "
    "Nothing of this result was kept. Close that program, change the permissions or choose "
    "another --out, then run again."
)
READ_ONLY = "output folder {name}: the disk is read-only. Choose another --out, then run again."
NOT_A_FOLDER = "output folder {name}: a file stands where the folder must be. Choose another --out."
DISK_FAULT = (
    "output folder {name}: the disk reports {cause}. Nothing of this result was kept. Check the "
    "disk or network share, then run again."
)
FOLDER_IN_USE = (
    "output folder {name}: another run (process {pid}) is writing to it. Wait until it has "
    "finished, or choose another --out."
)

NO_RESULT_HERE = (
    "{name}: no result folder here. Name the folder of one study, or the one that holds several."
)

DIFFERENCE_WORDS = {
    "changed": "is not what the manifest says",
    "missing": "is in the manifest and not in the folder",
    "extra": "is in the folder and not in the manifest",
    "unfinished": "the folder has no manifest: it was never finished",
    "unreadable": "is damaged or cannot be read",
}
"""What `verify` says of each kind of difference."""
