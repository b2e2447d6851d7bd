"""The rules of the house hold in this checkout."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from tests.architecture import rules

Rule = Callable[[Path], list[str]]


@pytest.mark.parametrize(
    "rule",
    [
        rules.entered_past_the_front_door,
        rules.arithmetic_at_the_doors,
        rules.files_touched_in_the_middle,
        rules.vague_names,
        rules.long_files,
        rules.top_level,
        rules.machine_addresses,
        rules.undocumented,
        rules.rooms_told_wrongly,
        rules.untested_rooms,
    ],
    ids=lambda rule: rule.__name__,
)
def test_the_project_keeps_the_rule(rule: Rule, repository: Path) -> None:
    assert rule(repository) == []
