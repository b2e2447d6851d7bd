"""DICOM files -> plans and arrays."""
