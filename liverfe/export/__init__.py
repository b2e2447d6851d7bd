"""Result -> files: `result.json`, tables, NIfTI maps with BIDS names, and their folder.

One file a format. Nothing is computed here: everything is read from a `StudyResult`, and what
comes after `result_document` is read from that document, so that no two files can disagree.

A result is written in this order: `check_writable` before the work, `lock_folder` around it, then
`result_document`, `to_json_bytes`, `regions_csv`, `map_files`, and `write_result` at the end.
"""

from liverfe.export.bids import bids_dataset_files, bids_path
from liverfe.export.csv_tables import (
    REGION_COLUMNS,
    SUMMARY_COLUMNS,
    regions_csv,
    safe_cell,
    summary_csv,
    summary_row,
)
from liverfe.export.disk import check_writable
from liverfe.export.folder import (
    WrittenResult,
    is_already_made,
    remove_leftovers,
    write_result,
)
from liverfe.export.lock import LockedFolder, lock_folder
from liverfe.export.manifest import InputFile, Provenance, fingerprint, provenance_of
from liverfe.export.nifti import map_files
from liverfe.export.output_file import OutputFile
from liverfe.export.result_json import result_document, to_json_bytes
from liverfe.export.verify import Difference, find_results, verify_folder

__all__ = [
    "REGION_COLUMNS",
    "SUMMARY_COLUMNS",
    "Difference",
    "InputFile",
    "LockedFolder",
    "OutputFile",
    "Provenance",
    "WrittenResult",
    "bids_dataset_files",
    "bids_path",
    "check_writable",
    "find_results",
    "fingerprint",
    "is_already_made",
    "lock_folder",
    "map_files",
    "provenance_of",
    "regions_csv",
    "remove_leftovers",
    "result_document",
    "safe_cell",
    "summary_csv",
    "summary_row",
    "to_json_bytes",
    "verify_folder",
    "write_result",
]
