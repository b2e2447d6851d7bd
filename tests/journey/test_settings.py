"""Precedence: flag, environment, project file, user file, default (contract)."""

from __future__ import annotations

import os
import sys
from pathlib import Path

import pytest

from liverfe.errors import UsageError
from liverfe.journey import Settings, configuration_folder, resolve_settings


def resolve(
    tmp_path: Path,
    *,
    flag: str | None = None,
    environment: str | None = None,
    project: str = "",
    user: str = "",
) -> Settings:
    work, home = tmp_path / "work", tmp_path / "home"
    work.mkdir(exist_ok=True)
    home.mkdir(exist_ok=True)
    (work / "liverfe.toml").write_text(project, encoding="utf-8")
    (home / "config.toml").write_text(user, encoding="utf-8")
    variables = {"LIVERFE_CONFIG_DIR": str(home)}
    if environment:
        variables["LIVERFE_CURVE"] = environment
    return resolve_settings({"curve": flag}, environment=variables, working_folder=work)


LAYERS = {
    "flag": "by_flag",
    "environment": "by_environment",
    "project": 'curve = "by_project"',
    "user": 'curve = "by_user"',
}


@pytest.mark.parametrize("strongest", range(5))
def test_the_first_that_states_a_setting_wins(tmp_path: Path, strongest: int) -> None:
    names = list(LAYERS)[strongest:]
    settings = resolve(tmp_path, **{name: LAYERS[name] for name in names})
    assert settings.curve == (f"by_{names[0]}" if names else None)
    origin = settings.explained()["curve"]["origin"]
    told = {
        "flag": "option --curve",
        "environment": "environment LIVERFE_CURVE",
        "project": "project file",
        "user": "user file",
    }
    assert str(origin).startswith(told[names[0]] if names else "default")


def test_a_file_means_its_own_folder(tmp_path: Path) -> None:
    settings = resolve(tmp_path, project='method = "a.toml"', user='curve_file = ["c.toml"]')
    assert settings.method == tmp_path / "work" / "a.toml"
    assert settings.curve_file == (tmp_path / "home" / "c.toml",)


def test_the_nearest_spelling_is_proposed(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match=r"'curv'.*Did you mean 'curve'"):
        resolve(tmp_path, project='curv = "x"')


@pytest.mark.parametrize(
    "text",
    [
        'identity = "name"',
        "workers = 0",
        "workers = true",
        'workers = "many"',
        "timeout_min = 0",
        "timeout_min = nan",
        "curve = 3",
        "method = 1",
        "not toml at all",
    ],
)
def test_a_value_that_cannot_be_is_refused_with_its_file(tmp_path: Path, text: str) -> None:
    with pytest.raises(UsageError, match=r"liverfe\.toml"):
        resolve(tmp_path, project=text)


def test_the_environment_states_numbers_and_lists(tmp_path: Path) -> None:
    variables = {
        "LIVERFE_CONFIG_DIR": str(tmp_path),
        "LIVERFE_WORKERS": "3",
        "LIVERFE_TIMEOUT_MIN": "1.5",
        "LIVERFE_CURVE_FILE": os.pathsep.join(["a.toml", "b.toml"]),
    }
    settings = resolve_settings({}, environment=variables, working_folder=tmp_path)
    assert settings.workers == 3
    assert settings.timeout_s == 90.0
    assert settings.curve_file == (tmp_path / "a.toml", tmp_path / "b.toml")


@pytest.mark.skipif(sys.platform in ("win32", "darwin"), reason="the rule of Linux")
def test_the_configuration_folder_follows_the_base_directory_specification() -> None:
    # XDG Base Directory Specification 0.8: a relative path is to be ignored.
    assert configuration_folder({"XDG_CONFIG_HOME": "/etc/xdg"}) == Path("/etc/xdg/liverfe")
    home = Path.home() / ".config" / "liverfe"
    assert configuration_folder({"XDG_CONFIG_HOME": "relative"}) == home
    assert configuration_folder({}) == home
    assert configuration_folder({"LIVERFE_CONFIG_DIR": "/x"}) == Path("/x")
