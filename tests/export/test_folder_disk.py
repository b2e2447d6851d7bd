"""Whatever a disk does: no half result under a final name, nothing left, one plain sentence."""

import errno
import os
import subprocess
import sys
import textwrap
from pathlib import Path

import pytest

from liverfe.errors import UsageError
from liverfe.export import (
    check_writable,
    lock_folder,
    verify_folder,
    write_result,
)
from tests.export.folders import FILES, KEY, bytes_in, names_in, on_posix, provenance, write


class Disk:
    """A disk whose k-th call fails, once or from then on; counts the calls."""

    CALLS = ("write", "fsync", "rename", "mkdir", "open")

    def __init__(self, monkeypatch, fails_at, cause=errno.ENOSPC, for_good=False, calls=CALLS):
        self.n_calls = 0
        for name in calls:
            real = getattr(os, name)

            def call(*args, _real=real, **kwargs):
                self.n_calls += 1
                is_broken = self.n_calls >= fails_at if for_good else self.n_calls == fails_at
                if is_broken:
                    raise OSError(cause, os.strerror(cause))
                return _real(*args, **kwargs)

            monkeypatch.setattr(os, name, call)


@pytest.mark.parametrize("has_older", [False, True])
def test_failure_of_any_single_call_leaves_no_half_result(tmp_path, has_older):
    n_failed = 0
    for k in range(1, 1000):
        parent = tmp_path / str(k)
        if has_older:
            write(parent, method={"id": "older"})
        before = bytes_in(parent) if has_older else {}
        with lock_folder(parent / KEY) as folder, pytest.MonkeyPatch.context() as monkeypatch:
            disk = Disk(monkeypatch, k)
            try:
                write_result(folder, FILES, provenance())
            except UsageError:
                n_failed += 1
            else:
                assert disk.n_calls < k  # every call was made to fail once
                break
        assert bytes_in(parent) == before, k
        assert names_in(parent) == ([KEY] if has_older else []), k
    # At least one open, one write and one fsync a file, a rename, the folders.
    assert n_failed > 3 * len(FILES) + 5


def test_disk_that_stays_broken_leaves_no_folder_without_a_manifest(tmp_path):
    for k in range(1, 1000):
        parent = tmp_path / str(k)
        write(parent, method={"id": "older"})
        older = bytes_in(parent / KEY)
        with lock_folder(parent / KEY) as folder, pytest.MonkeyPatch.context() as monkeypatch:
            disk = Disk(monkeypatch, k, for_good=True, calls=("write", "fsync", "rename"))
            try:
                write_result(folder, FILES, provenance())
            except UsageError:
                pass
            else:
                assert disk.n_calls < k
                return
        results = [path for path in parent.iterdir() if path.is_dir()]
        assert all((path / "manifest.json").exists() for path in results), k
        assert older in [bytes_in(path) for path in results], k


@on_posix
def test_process_killed_at_any_call_leaves_no_half_result_and_the_next_run_completes(tmp_path):
    # A child dies at its k-th call as by SIGKILL: no handler, no clean-up.
    program = textwrap.dedent(f"""
        import os, sys
        from pathlib import Path
        from liverfe.export import InputFile, OutputFile, lock_folder, provenance_of, write_result
        parent, k = Path(sys.argv[1]), int(sys.argv[2])
        files = [OutputFile(path=p, content=p.encode() * 100) for p in ("result.json", "maps/a.gz")]
        provenance = provenance_of(key="{KEY}", method={{"id": "house"}}, software={{}}, inputs=[])
        for start in range(1, 30):
            if os.fork() == 0:
                with lock_folder(parent / str(start) / "{KEY}") as folder:
                    n = 0
                    for name in ("write", "fsync", "rename", "mkdir", "open"):
                        def call(*args, _real=getattr(os, name), **kwargs):
                            global n
                            n += 1
                            if n == start:
                                os._exit(9)
                            return _real(*args, **kwargs)
                        setattr(os, name, call)
                    write_result(folder, files, provenance)
                os._exit(0)
            _, status = os.wait()
            if status == 0:
                print(start)
                break
    """)
    done = subprocess.run(
        [sys.executable, "-c", program, tmp_path, "0"], capture_output=True, text=True, check=True
    )
    n_kills = int(done.stdout) - 1
    assert n_kills > 10
    n_left = 0
    for k in range(1, n_kills + 1):
        parent = tmp_path / str(k)
        final = parent / KEY
        assert not final.exists() or verify_folder(final) == (), k
        n_left += any(name.endswith(".part") for name in names_in(parent))
        assert write(parent).state == "written"
        assert verify_folder(parent) == ()
        assert [name for name in names_in(parent) if name.startswith(".")] == [], k
    assert n_left > 5  # kills did leave something to sweep up


def test_every_file_is_synced_before_the_rename_and_closed(tmp_path, monkeypatch):
    opened, synced, renamed = {}, set(), []
    real_open, real_fsync, real_rename = os.open, os.fsync, os.rename

    def opens(path, *args, **kwargs):
        descriptor = real_open(path, *args, **kwargs)
        opened[descriptor] = Path(path).name
        return descriptor

    def syncs(descriptor):
        synced.add(opened[descriptor])
        real_fsync(descriptor)

    def renames(source, target):
        renamed.append(set(synced))
        real_rename(source, target)

    with lock_folder(tmp_path / KEY) as folder:
        monkeypatch.setattr(os, "open", opens)
        monkeypatch.setattr(os, "fsync", syncs)
        monkeypatch.setattr(os, "rename", renames)
        write_result(folder, FILES, provenance())
        monkeypatch.undo()
        (before_the_rename,) = renamed
        names = {Path(file.path).name for file in FILES}
        assert names | {"manifest.json"} <= before_the_rename
        for descriptor in opened:
            with pytest.raises(OSError, match="Bad file descriptor"):
                os.fstat(descriptor)


def test_disk_that_takes_a_few_bytes_at_a_time_still_gets_them_all(tmp_path, monkeypatch):
    real = os.write
    with lock_folder(tmp_path / KEY) as folder:
        monkeypatch.setattr(os, "write", lambda descriptor, data: real(descriptor, data[:777]))
        write_result(folder, FILES, provenance())
    assert (tmp_path / KEY / "report.pdf").read_bytes() == FILES[1].content
    assert verify_folder(tmp_path / KEY) == ()


@pytest.mark.parametrize(
    ("cause", "words"),
    [
        (errno.ENOSPC, "no space left"),
        (errno.EDQUOT, "quota"),
        (errno.EACCES, "not permitted"),
        (errno.EROFS, "read-only"),
        (errno.EIO, "Input/output error"),
    ],
)
def test_disk_error_becomes_one_sentence_with_cause_and_remedy_and_no_path(tmp_path, cause, words):
    with lock_folder(tmp_path / KEY) as folder, pytest.MonkeyPatch.context() as monkeypatch:
        Disk(monkeypatch, 3, cause=cause)
        with pytest.raises(UsageError, match=words) as caught:
            write_result(folder, FILES, provenance())
    assert str(tmp_path) not in str(caught.value)
    assert caught.value.__cause__ is None
    assert "run again" in str(caught.value)


def test_interrupt_leaves_nothing_behind(tmp_path, monkeypatch):
    def interrupted(*args):
        raise KeyboardInterrupt

    with lock_folder(tmp_path / KEY) as folder:
        monkeypatch.setattr(os, "rename", interrupted)
        with pytest.raises(KeyboardInterrupt):
            write_result(folder, FILES, provenance())
    assert names_in(tmp_path) == []


def test_file_where_the_folder_must_be_is_refused_and_kept(tmp_path):
    (tmp_path / KEY).write_text("mine")
    with pytest.raises(UsageError, match="a file stands where"):
        write(tmp_path)
    assert (tmp_path / KEY).read_text() == "mine"


def test_check_writable_makes_the_folder_and_leaves_nothing(tmp_path):
    check_writable(tmp_path / "new" / "out")
    assert names_in(tmp_path / "new" / "out") == []


def test_check_writable_says_why_not(tmp_path, monkeypatch):
    (tmp_path / "file").write_text("x")
    with pytest.raises(UsageError, match="a file stands where"):
        check_writable(tmp_path / "file" / "out")
    with pytest.raises(UsageError, match="a file stands where"):
        check_writable(tmp_path / "file")
    Disk(monkeypatch, 1, cause=errno.EACCES, calls=("write",))
    with pytest.raises(UsageError, match="output folder out: writing is not permitted"):
        check_writable(tmp_path / "out")
    assert names_in(tmp_path / "out") == []
