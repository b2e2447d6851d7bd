"""What the last step needs is imported while the images load.

matplotlib takes half a second, much of it reading and linking compiled libraries, which lets other
threads run.
"""

from __future__ import annotations

import importlib
import threading
from contextlib import suppress

_NEEDED_LATER = "liverfe.report"


def start_warming() -> threading.Thread:
    """Import the report in the background.

    Returns
    -------
    Thread
        Already running; whoever needs the room simply imports it and waits as long as it takes.
    """
    thread = threading.Thread(target=_import_room, name="warming", daemon=True)
    thread.start()
    return thread


def _import_room() -> None:
    # A room that cannot be imported says so where it is needed, in the thread that needs it.
    with suppress(Exception):
        importlib.import_module(_NEEDED_LATER)
