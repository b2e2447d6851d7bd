"""A made-up result, written as a run writes it."""

import gzip
import sys

import pytest

from liverfe.export import (
    InputFile,
    OutputFile,
    lock_folder,
    provenance_of,
    write_result,
)

KEY = "0123456789abcdef"
IMAGE = InputFile(role="image", sha256="ab" * 32, n_bytes=6)
on_posix = pytest.mark.skipif(sys.platform == "win32", reason="forks, or takes a POSIX lock")
FILES = (
    OutputFile(path="result.json", content=b"{}\n"),
    OutputFile(path="report.pdf", content=b"%PDF" * 5000),
    OutputFile(path="maps/sub-1_R2starmap.nii.gz", content=gzip.compress(b"map", mtime=0)),
    OutputFile(path="dicom/sr/1.dcm", content=b"DICM"),
)


def provenance(**changes):
    """What the made-up result was made of."""
    given = {
        "key": KEY,
        "method": {"id": "house-1", "trim": "mad"},
        "software": {"liverfe": "0.1.0"},
        "inputs": [IMAGE],
    }
    return provenance_of(**(given | changes))


def write(parent, files=FILES, **changes):
    """Write the made-up result."""
    with lock_folder(parent / KEY) as folder:
        return write_result(folder, files, provenance(**changes))


def names_in(parent):
    """What stands in a folder, hidden things too."""
    return sorted(path.name for path in parent.iterdir())


def bytes_in(folder):
    """All files under a folder."""
    return {
        path.relative_to(folder).as_posix(): path.read_bytes()
        for path in folder.rglob("*")
        if path.is_file()
    }
