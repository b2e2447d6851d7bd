"""What later steps need is made ready while the images are read.

The compiled kernels are loaded (on a new machine they are compiled first, once), and the report's
libraries are imported: half a second each, much of it reading and linking, which lets other threads
run.
"""

from __future__ import annotations

import importlib
import threading
from contextlib import suppress

from liverfe.fit import warm_up


def start_warming() -> threading.Thread:
    """Load kernels and report in the background.

    Returns
    -------
    Thread
        Already running; whoever needs what it makes ready takes it and waits as long as it takes.
    """
    # No daemon: at the end of the process a compiler must not lose its ground in mid-work, which
    # would abort the process. So the end waits for the step at hand.
    thread = threading.Thread(target=_warm, name="warming")
    thread.start()
    return thread


def _warm() -> None:
    for step in (warm_up, _import_report):
        if not threading.main_thread().is_alive():
            return
        # What fails here fails again where it is needed, and says so in the thread that needs it.
        with suppress(Exception):
            step()


def _import_report() -> None:
    importlib.import_module("liverfe.report")
    # The drawing library takes this one only when it saves the first figure.
    importlib.import_module("matplotlib.backends.backend_svg")
