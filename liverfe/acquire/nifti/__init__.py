"""NIfTI files and their sidecars -> plans and arrays."""
