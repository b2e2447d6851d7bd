"""What every room's tests may ask for."""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path

import hypothesis
import pytest

REPOSITORY = Path(__file__).resolve().parents[1]

# A machine of CI tries the same examples each time; elsewhere each run looks at new ones.
hypothesis.settings.register_profile("here", deadline=None)
hypothesis.settings.register_profile("ci", deadline=None, derandomize=True)
hypothesis.settings.load_profile("ci" if os.environ.get("CI") == "true" else "here")


@pytest.fixture(scope="session", autouse=True)
def _no_settings_of_the_user(tmp_path_factory: pytest.TempPathFactory) -> Iterator[None]:
    """Hide the user's own settings and secret from every test and from what it starts."""
    with pytest.MonkeyPatch.context() as patch:
        for name in [name for name in os.environ if name.startswith("LIVERFE_")]:
            if name != "LIVERFE_SHARED_DATA":
                patch.delenv(name)
        patch.setenv("LIVERFE_CONFIG_DIR", str(tmp_path_factory.mktemp("configuration")))
        yield


@pytest.fixture(scope="session")
def repository() -> Path:
    """The folder that holds pyproject.toml."""
    return REPOSITORY


@pytest.fixture(scope="session")
def shared_data() -> Path:
    """The real scans beside the project; a machine of CI must have them.

    Their place is `LIVERFE_SHARED_DATA`, or `../shared/data` as seen from the repository.
    """
    named = os.environ.get("LIVERFE_SHARED_DATA")
    folder = Path(named) if named else REPOSITORY.parent / "shared" / "data"
    if folder.is_dir():
        return folder
    reason = "the real scans are not here: set LIVERFE_SHARED_DATA to their folder"
    if os.environ.get("CI") == "true":
        pytest.fail(reason)
    pytest.skip(reason)
