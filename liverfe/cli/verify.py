"""`liverfe verify`: is a result still what its manifest says?"""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from liverfe.cli.frame import AsJson
from liverfe.cli.screen import say, show, show_document
from liverfe.wording import command_help
from liverfe.wording import command_line as words


def verify(
    folder: Annotated[
        Path, typer.Argument(metavar="DIR", exists=True, file_okay=False, help=command_help.DIR)
    ],
    as_json: AsJson = False,
) -> int:
    """Hash again and compare; 3 on any difference."""
    from liverfe.export import find_results, verify_folder

    differences = verify_folder(folder)
    results = find_results(folder)
    if as_json:
        show_document(
            {
                "schema": 1,
                "results": [result.name for result in results],
                "differences": [
                    {"result": found.folder, "path": found.path, "kind": found.kind}
                    for found in differences
                ],
            }
        )
        return 3 if differences else 0
    for difference in differences:
        say(difference.text)
    different = {difference.folder for difference in differences}
    line = words.VERIFY_LAST_DIFFERS if different else words.VERIFY_LAST_OK
    show(line.format(n=len(results), n_bad=len(different)))
    return 3 if differences else 0
