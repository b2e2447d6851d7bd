"""The table of what the estimator must reach, measured: ``python -m tests.statistics.table``.

    --only ROW [ROW ...]   some rows: rmse bias region coverage sigma limit speed curve-fit optimum
                           memory
    --cut                  the small cut that every test run measures, in seconds
    --json                 one JSON document on standard output

`scripts/bench` calls this and adds the row of the whole command. The status is 1 where a row was
missed. Progress goes to standard error.
"""

from __future__ import annotations

import argparse
import json
import sys
import time
from collections.abc import Callable, Iterable, Sequence
from dataclasses import asdict
from typing import Any

from tests.statistics.cells import Row, Say
from tests.statistics.cost import measure_curve_fit, measure_memory, measure_speed
from tests.statistics.coverage import measure_coverage
from tests.statistics.limit import measure_limit
from tests.statistics.optimum import measure_optimum
from tests.statistics.precision import measure_precision, measure_region_bias
from tests.statistics.sigma import measure_sigma

Measure = Callable[[bool, Say], Sequence[Row]]

MEASURES: dict[tuple[str, ...], Measure] = {
    ("rmse", "bias"): lambda full, say: measure_precision(full=full, say=say),
    ("region",): lambda full, say: [measure_region_bias(full=full, say=say)],
    ("coverage",): lambda full, say: [measure_coverage(full=full, say=say)],
    ("sigma",): lambda full, say: [measure_sigma(full=full, say=say)],
    ("limit",): lambda full, say: [measure_limit(full=full, say=say)],
    ("speed",): lambda full, say: [measure_speed(full=full, say=say)],
    ("curve-fit",): lambda full, say: [measure_curve_fit(full=full, say=say)],
    ("optimum",): lambda full, say: [measure_optimum(full=full, say=say)],
    ("memory",): lambda full, say: [measure_memory(full=full, say=say)],
}
"""Rows in the order of the table; what is drawn together is measured together."""

KEYS = tuple(key for keys in MEASURES for key in keys)


def measure_rows(keys: Iterable[str] = KEYS, *, full: bool, say: Say) -> list[Row]:
    """Measure the rows that were asked for, in the order of the table."""
    wanted, found = set(keys), []
    for keys_together, measure in MEASURES.items():
        if wanted.isdisjoint(keys_together):
            continue
        started = time.perf_counter()
        rows = [row for row in measure(full, say) if row.key in wanted]
        say(f"{', '.join(keys_together)}: {time.perf_counter() - started:.0f} s")
        found += rows
    return found


def as_document(row: Row) -> dict[str, Any]:
    """A row as JSON has it: figures that could not be measured are null."""
    document = asdict(row) | {"reached": row.reached}
    for cell in document["cells"]:
        if cell["measured"] != cell["measured"]:
            cell["measured"] = None
    return document


class Progress:
    """Overwrites one line on a terminal; elsewhere says a line now and then."""

    def __init__(self, *, every_s: float = 15.0) -> None:
        self._on_terminal, self._every_s, self._last = sys.stderr.isatty(), every_s, 0.0

    def __call__(self, line: str) -> None:
        """Show how far it has come."""
        if self._on_terminal:
            sys.stderr.write(f"\r\x1b[K{line[:100]}")
        elif time.monotonic() - self._last < self._every_s:
            return
        else:
            self._last = time.monotonic()
            sys.stderr.write(f"{line}\n")
        sys.stderr.flush()

    def close(self) -> None:
        """Leave the line clean."""
        if self._on_terminal:
            sys.stderr.write("\r\x1b[K")


def main(arguments: Sequence[str] | None = None) -> int:
    """Measure and print; 1 where a row was missed."""
    parser = argparse.ArgumentParser(prog="python -m tests.statistics.table")
    parser.add_argument("--only", nargs="+", choices=KEYS, default=KEYS, metavar="ROW")
    parser.add_argument("--cut", action="store_true", help="the small cut")
    parser.add_argument("--json", action="store_true", help="one JSON document")
    options = parser.parse_args(arguments)
    progress = Progress()
    rows = measure_rows(options.only, full=not options.cut, say=progress)
    progress.close()
    if options.json:
        print(json.dumps([as_document(row) for row in rows], indent=1))
    else:
        for row in rows:
            verdict = "yes" if row.reached else "NO"
            print(f"{row.key} | {row.asked} | {row.measured} | {verdict}")
    return 0 if all(row.reached for row in rows) else 1


if __name__ == "__main__":
    sys.exit(main())
