#!/usr/bin/env python3
"""Write `docs/reference/findings.md` from `liverfe.wording.FINDING_TABLE`, its only source.

    .venv/bin/python scripts/findings_page.py

`tests/docs` holds the page and the table together.
"""

from __future__ import annotations

import re
import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from liverfe.wording import FINDING_TABLE, FindingWording

PAGE = Path(__file__).resolve().parents[1] / "docs" / "reference" / "findings.md"

TITLE = """\
# Findings

Every doubt that liverfe can raise about a study, by its code as it stands in `result.json`, on the
report and in `summary.csv`. Words in *italics* are filled in: a file, a tag, a number. This page is
written by `scripts/findings_page.py` from the table that the program itself uses.
"""
LEVELS = {
    "stop": "Refused: nothing in the study can be trusted, so no R2\\* and no LIC are stated.",
    "caution": "A reader must see it: it stands on page 1 of the report.",
    "note": "Corrected beyond doubt, or harmless; it stands among the findings.",
}


def page() -> str:
    """Return the page as it should stand: graver levels first, codes in order."""
    parts = [TITLE]
    for level, meaning in LEVELS.items():
        codes = sorted(code for code, entry in FINDING_TABLE.items() if entry.level == level)
        parts.append(f"## {level.capitalize()}\n\n{meaning}\n")
        parts += [section(code, FINDING_TABLE[code]) for code in codes]
    return "\n".join(parts)


def section(code: str, entry: FindingWording) -> str:
    """Return one finding: what was found, what it would do to LIC, what to do."""
    return (
        f"### `{code}`\n\n"
        f"{filled(entry.text)}\n\n"
        f"Effect on LIC\n: {filled(entry.effect)}\n\n"
        f"What to do\n: {filled(entry.remedy)}\n"
    )


def filled(words: str) -> str:
    """Show the places that are filled in, and keep signs of the trade from being read as markup."""
    words = re.sub(r"([*_<>|\\])", r"\\\1", words)
    words = re.sub(r"(?<![\w`-])--[a-z][a-z-]*[a-z]", r"`\g<0>`", words)
    return re.sub(r"\{(\w+(?:\\_\w+)*)[^{}]*\}", lambda m: f"*{m[1].replace(chr(92), '')}*", words)


if __name__ == "__main__":
    PAGE.write_text(page(), encoding="utf-8", newline="\n")
    print(f"{PAGE.name}: {len(FINDING_TABLE)} findings")
