"""`summary.csv`: a row for each stack and each refused study, at any moment and at the end."""

from __future__ import annotations

import os
from collections import Counter
from collections.abc import Iterable
from pathlib import Path
from typing import Any

from liverfe.export import SUMMARY_COLUMNS, summary_csv
from liverfe.wording import CAUTION
from liverfe.wording.command_line import (
    BATCH_COUNT,
    BATCH_DONE_BEFORE,
    BATCH_LAST,
    BATCH_ROW,
    BATCH_ROW_CLEAN,
)

SUMMARY_NAME = "summary.csv"

FAILED = "failed"
WAITING = "waiting"

_WORST_FIRST = (FAILED, WAITING, "refused", "caution", "reported")
"""What a reader must look at first."""

Row = dict[str, Any]


def plain_row(key: str, patient_key: str, outcome: str, reason: str) -> Row:
    """Make the row of a study that has no document.

    Parameters
    ----------
    key, patient_key : str
        Its keys.
    outcome : {'waiting', 'failed'}
        Not done yet, or lost.
    reason : str
        In words.

    Returns
    -------
    dict
        With every column of a summary.
    """
    row: Row = dict.fromkeys(SUMMARY_COLUMNS)
    row |= {
        "key": key,
        "patient_key": patient_key or None,
        "outcome": outcome,
        "reason": reason,
        "caution": CAUTION,
    }
    return row


def standing(row: Row) -> str:
    """Tell how much a row wants to be looked at: an entry of the list above."""
    if row["outcome"] == "reported" and row["reason"]:
        return "caution"
    return str(row["outcome"])


def worst_first(rows: Iterable[Row]) -> list[Row]:
    """Sort rows by how much they want to be looked at, then by key."""
    return sorted(rows, key=lambda row: (_WORST_FIRST.index(standing(row)), row["key"]))


def told_row(row: Row) -> str:
    """Tell a row in one line."""
    if not row["reason"]:
        return BATCH_ROW_CLEAN.format(key=row["key"], outcome=standing(row))
    return BATCH_ROW.format(key=row["key"], outcome=standing(row), reason=row["reason"])


def told_counts(rows: Iterable[Row], n_done_before: int) -> str:
    """Tell how many rows there are of each standing, and how many were done before."""
    listed = list(rows)
    counts = Counter(standing(row) for row in listed)
    shown = [
        BATCH_COUNT.format(n=counts[word], outcome=word) for word in _WORST_FIRST if counts[word]
    ]
    before = BATCH_DONE_BEFORE.format(n=n_done_before) if n_done_before else ""
    return BATCH_LAST.format(total=len(listed), counts=", ".join(shown), before=before)


def write_summary(out: Path, rows: Iterable[Row]) -> Path:
    """Write the summary, so that a reader sees the old one or the new one and nothing between.

    Parameters
    ----------
    out : Path
        The output folder.
    rows : iterable of dict
        All rows.

    Returns
    -------
    Path
        Where it lies.
    """
    place = out / SUMMARY_NAME
    draft = out / f".{SUMMARY_NAME}.{os.getpid()}.part"
    listed: list[Row] = sorted(rows, key=lambda row: str(row["key"]))
    content = summary_csv(listed)
    try:
        with draft.open("wb") as file:
            file.write(content)
            file.flush()
            os.fsync(file.fileno())
        draft.replace(place)
    finally:
        draft.unlink(missing_ok=True)
    return place
