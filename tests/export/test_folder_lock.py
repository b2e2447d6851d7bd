"""Two runs never write into one folder."""

import errno
import os
import subprocess
import sys
import textwrap
from pathlib import Path

import pytest

from liverfe.errors import UsageError
from liverfe.export import (
    lock_folder,
    verify_folder,
)
from tests.export.folders import KEY, names_in, on_posix, write

HOLD = textwrap.dedent("""
    import sys
    from pathlib import Path
    from liverfe.export import lock_folder
    with lock_folder(Path(sys.argv[1])):
        print("locked", flush=True)
        sys.stdin.read()
""")
"""A run that holds its folder until its input is closed."""


def hold(folder):
    """Start another run on a folder and wait until it has it."""
    child = subprocess.Popen(
        [sys.executable, "-c", HOLD, folder],
        stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True, cwd=Path.cwd(),
    )  # fmt: skip
    assert child.stdout.readline() == "locked\n"
    return child


def test_second_run_on_a_folder_is_refused_with_the_first_ones_process_id(tmp_path):
    with hold(tmp_path / KEY) as first:
        with (
            pytest.raises(UsageError, match=rf"process {first.pid}\b"),
            lock_folder(tmp_path / KEY),
        ):
            pass
        with lock_folder(tmp_path / "fedcba9876543210"):
            pass  # another study is free
        first.stdin.close()
    write(tmp_path)
    assert names_in(tmp_path) == [KEY]


def test_lock_of_a_killed_run_is_taken_over(tmp_path):
    with hold(tmp_path / KEY) as first:
        first.kill()
        first.wait()
        assert (tmp_path / f".{KEY}.lock").read_text().strip() == str(first.pid)
        assert write(tmp_path).state == "written"
    assert names_in(tmp_path) == [KEY]


def test_lock_in_the_same_process_holds_too(tmp_path):
    with (
        lock_folder(tmp_path / KEY),
        pytest.raises(UsageError, match=rf"process {os.getpid()}\b"),
        lock_folder(tmp_path / KEY),
    ):
        pass


@on_posix
def test_lock_whose_file_was_swapped_while_waiting_is_taken_anew(tmp_path, monkeypatch):
    # The holder removes the file between our opening and locking it: a lock on the removed file
    # would keep nobody out.
    import fcntl

    path = tmp_path / f".{KEY}.lock"
    real, n_calls = fcntl.flock, []

    def swap(descriptor, operation):
        n_calls.append(descriptor)
        if len(n_calls) == 1:
            path.unlink()
        return real(descriptor, operation)

    monkeypatch.setattr(fcntl, "flock", swap)
    with lock_folder(tmp_path / KEY):
        assert len(n_calls) == 2
        assert path.read_text().strip() == str(os.getpid())


@on_posix
def test_disk_without_locks_still_writes_whole_results(tmp_path, monkeypatch):
    import fcntl

    def no_locks(*args):
        raise OSError(errno.ENOLCK, "No locks available")

    monkeypatch.setattr(fcntl, "flock", no_locks)
    assert write(tmp_path).state == "written"
    assert verify_folder(tmp_path) == ()
