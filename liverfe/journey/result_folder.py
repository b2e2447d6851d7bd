"""A result -> its folder: document, report, tables and maps, made side by side."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from typing import Any

from liverfe.export import (
    LockedFolder,
    OutputFile,
    Provenance,
    map_files,
    regions_csv,
    result_document,
    to_json_bytes,
    write_result,
)
from liverfe.journey.settings import Identity
from liverfe.study import StudyLabel, StudyResult


def write_result_folder(
    folder: LockedFolder,
    result: StudyResult,
    *,
    label: StudyLabel,
    identity: Identity,
    provenance: Provenance,
) -> dict[str, Any]:
    """Write everything that a study's result consists of.

    A refused study gets its document and one page, which says why; tables and maps would be empty,
    and an empty table is easily read as "nothing found".

    Parameters
    ----------
    folder : LockedFolder
        Where to.
    result : StudyResult
        What to write.
    label : StudyLabel
        Its keys.
    identity : {'full', 'key'}
        What the report may carry.
    provenance : Provenance
        What it was made of, versions among it.

    Returns
    -------
    dict
        What ``result.json`` holds.
    """
    # Late, so that the page's libraries load while the images do (`liverfe.journey.warming`).
    from liverfe.report import write_report  # noqa: PLC0415

    document = result_document(result, label=label, software=provenance.software)
    json_bytes = to_json_bytes(document)
    files = [OutputFile(path="result.json", content=json_bytes)]
    # Compressing maps and typesetting both leave the interpreter to others while they work.
    with ThreadPoolExecutor(max_workers=1) as executor:
        maps = executor.submit(map_files, result, document)
        report = write_report(
            result,
            label=label,
            document=json_bytes,
            software=provenance.software,
            identity=identity,
            n_input_files=len(provenance.inputs),
        )
        files.append(OutputFile(path="report.pdf", content=report))
        files += maps.result()
    if result.outcome == "reported":
        files.append(OutputFile(path="regions.csv", content=regions_csv(document)))
    write_result(folder, files, provenance)
    return document
