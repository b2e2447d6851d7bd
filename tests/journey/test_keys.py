"""Keys name a study and nobody; the secret behind them is made once and stays its owner's."""

from __future__ import annotations

import multiprocessing
import os
import stat
from pathlib import Path

import pytest

from liverfe.errors import UsageError
from liverfe.journey import key_of, load_secret, peek_secret


def test_a_key_is_the_start_of_the_hmac() -> None:
    # RFC 4231, test case 1: key of twenty 0x0b, data "Hi There".
    assert key_of("Hi There", b"\x0b" * 20) == "b0344c61d8db3853"
    # RFC 4231, test case 2.
    assert key_of("what do ya want for nothing?", b"Jefe") == "5bdcc146bf60754e"


def test_nobody_has_no_key() -> None:
    assert key_of("", b"secret") == ""


def test_the_secret_is_made_once_and_kept(tmp_path: Path) -> None:
    assert peek_secret(tmp_path) is None
    secret = load_secret(tmp_path)
    assert len(secret) == 32
    assert load_secret(tmp_path) == secret == peek_secret(tmp_path)
    assert load_secret(tmp_path / "another") != secret


@pytest.mark.skipif(os.name != "posix", reason="file modes are POSIX's")
def test_the_secret_can_be_read_by_its_owner_alone(tmp_path: Path) -> None:
    folder = tmp_path / "configuration"
    load_secret(folder)
    (file,) = folder.iterdir()
    assert stat.S_IMODE(file.stat().st_mode) == 0o600
    assert stat.S_IMODE(folder.stat().st_mode) == 0o700
    file.chmod(0o644)
    load_secret(folder)
    assert stat.S_IMODE(file.stat().st_mode) == 0o600


def _load(folder: Path, start: object, found: object) -> None:
    start.wait()  # type: ignore[attr-defined]
    found.put(load_secret(folder))  # type: ignore[attr-defined]


def test_processes_that_start_at_once_agree_on_the_secret(tmp_path: Path) -> None:
    context = multiprocessing.get_context("fork" if os.name == "posix" else "spawn")
    n = 8
    for round_number in range(5):
        folder = tmp_path / str(round_number)
        start, found = context.Barrier(n), context.SimpleQueue()
        workers = [context.Process(target=_load, args=(folder, start, found)) for _ in range(n)]
        for worker in workers:
            worker.start()
        secrets = {found.get() for _ in range(n)}
        for worker in workers:
            worker.join()
        assert len(secrets) == 1
        assert [path.name for path in folder.iterdir()] == ["secret.key"]


def test_a_file_system_without_hard_links_serves(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def no_links(*unused: object) -> None:
        raise OSError(1, "Operation not permitted")

    monkeypatch.setattr(os, "link", no_links)
    assert load_secret(tmp_path) == load_secret(tmp_path)
    assert [path.name for path in tmp_path.iterdir()] == ["secret.key"]


def test_a_damaged_secret_is_refused_and_not_replaced(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("liverfe.journey.keys._WRITER_PATIENCE_S", 0.05)
    load_secret(tmp_path)
    file = tmp_path / "secret.key"
    file.write_text("cut off", encoding="ascii")
    with pytest.raises(UsageError, match="backup"):
        load_secret(tmp_path)
    assert file.read_text(encoding="ascii") == "cut off"


def test_a_folder_that_cannot_be_made_is_named(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("in the way", encoding="ascii")
    with pytest.raises(UsageError, match="LIVERFE_CONFIG_DIR"):
        load_secret(tmp_path / "file" / "folder")
