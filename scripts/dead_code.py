"""Find code that nobody uses, with vulture; called by ``scripts/check``.

Two things vulture cannot know: setting ``dataset.EchoTime`` writes an element into a DICOM file, so
attributes that are DICOM keywords count as used; and a test may ask for a fixture for its effect
alone, so arguments in tests do too. Where to look and what else counts stand in pyproject.toml,
``[tool.vulture]``.
"""

from __future__ import annotations

import sys
import tomllib
from pathlib import Path

from pydicom.datadict import keyword_dict
from vulture import Vulture


def main() -> int:
    """Print what is unused; 1 where there is anything."""
    settings = tomllib.loads(Path("pyproject.toml").read_text(encoding="utf-8"))["tool"]["vulture"]
    vulture = Vulture(
        ignore_names=settings["ignore_names"], ignore_decorators=settings["ignore_decorators"]
    )
    vulture.scavenge(settings["paths"])
    unused = [
        item
        for item in vulture.get_unused_code(min_confidence=settings["min_confidence"])
        if not (item.typ == "attribute" and item.name in keyword_dict)
        and not (
            item.typ == "variable" and item.confidence == 100 and "tests" in item.filename.parts
        )
    ]
    print("\n".join(item.get_report() for item in unused))
    return 1 if unused else 0


if __name__ == "__main__":
    sys.exit(main())
