"""Arguments -> one call. Each command is one file; nothing is computed here.

Heavy imports wait inside the commands, so that ``liverfe --help`` answers at once.
"""

from liverfe.cli.program import main

__all__ = ["main"]
