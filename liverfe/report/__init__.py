"""Result -> PDF: one page that answers, further pages that account for it."""

from liverfe.report.identity import Identity
from liverfe.report.write import write_report

__all__ = ["Identity", "write_report"]
