"""A result folder is there whole or not there; an older one is never lost; a second run waits."""

import errno
import gzip
import os
import subprocess
import sys
import textwrap
from pathlib import Path

import pytest

from liverfe.errors import UsageError
from liverfe.export import (
    InputFile,
    OutputFile,
    check_writable,
    fingerprint,
    is_already_made,
    lock_folder,
    provenance_of,
    verify_folder,
    write_result,
)

KEY = "0123456789abcdef"
IMAGE = InputFile(role="image", sha256="ab" * 32, n_bytes=6)
on_posix = pytest.mark.skipif(sys.platform == "win32", reason="forks, or takes a POSIX lock")
FILES = (
    OutputFile(path="result.json", content=b"{}\n"),
    OutputFile(path="report.pdf", content=b"%PDF" * 5000),
    OutputFile(path="maps/sub-1_R2starmap.nii.gz", content=gzip.compress(b"map", mtime=0)),
    OutputFile(path="dicom/sr/1.dcm", content=b"DICM"),
)


def provenance(**changes):
    """What the made-up result was made of."""
    given = {
        "key": KEY,
        "method": {"id": "house-1", "trim": "mad"},
        "software": {"liverfe": "0.1.0"},
        "inputs": [IMAGE],
    }
    return provenance_of(**(given | changes))


def write(parent, files=FILES, **changes):
    """Write the made-up result."""
    with lock_folder(parent / KEY) as folder:
        return write_result(folder, files, provenance(**changes))


def names_in(parent):
    """What stands in a folder, hidden things too."""
    return sorted(path.name for path in parent.iterdir())


def bytes_in(folder):
    """All files under a folder."""
    return {
        path.relative_to(folder).as_posix(): path.read_bytes()
        for path in folder.rglob("*")
        if path.is_file()
    }


def test_written_folder_holds_each_byte_and_verifies(tmp_path):
    written = write(tmp_path)
    assert (written.state, written.older) == ("written", None)
    assert names_in(tmp_path) == [KEY]  # no lock and no temporary folder stays
    found = bytes_in(written.path)
    assert {name: found[name] for name in found if name != "manifest.json"} == {
        file.path: file.content for file in FILES
    }
    assert verify_folder(tmp_path / KEY) == ()


def test_same_result_again_leaves_the_folder_alone(tmp_path):
    write(tmp_path)
    before = {path: path.stat().st_mtime_ns for path in (tmp_path / KEY).rglob("*")}
    again = write(tmp_path)
    assert (again.state, again.older) == ("unchanged", None)
    assert {path: path.stat().st_mtime_ns for path in (tmp_path / KEY).rglob("*")} == before
    assert names_in(tmp_path) == [KEY]


def test_same_result_in_another_place_has_the_same_bytes(tmp_path):
    first = write(tmp_path / "a").path
    second = write(tmp_path / "b", files=FILES[::-1]).path
    assert bytes_in(first) == bytes_in(second)


def test_same_image_packed_otherwise_is_the_same_result(tmp_path):
    write(tmp_path)
    packed = gzip.compress(b"map", compresslevel=0, mtime=0)
    assert packed != FILES[2].content
    other = OutputFile(path=FILES[2].path, content=packed)
    assert write(tmp_path, files=(*FILES[:2], other, FILES[3])).state == "unchanged"
    changed = OutputFile(path=FILES[2].path, content=gzip.compress(b"mop", mtime=0))
    assert write(tmp_path, files=(*FILES[:2], changed, FILES[3])).state == "written"


@pytest.mark.parametrize(
    "change",
    [
        {"method": {"id": "house-2", "trim": "none"}},
        {"inputs": [InputFile(role="image", sha256="cd" * 32, n_bytes=6)]},
        {"inputs": [IMAGE, InputFile(role="regions", sha256="ef" * 32, n_bytes=9)]},
        {"software": {"liverfe": "0.2.0"}},
        {"settings": {"identity": "key"}},
        {"files": FILES[:3]},
        {"files": (OutputFile(path="result.json", content=b"[]\n"), *FILES[1:])},
    ],
)
def test_older_result_of_anything_else_moves_to_v1_then_v2(tmp_path, change):
    write(tmp_path)
    first = bytes_in(tmp_path / KEY)
    second = write(tmp_path, **change)
    assert second.older == tmp_path / f"{KEY}.v1"
    assert bytes_in(tmp_path / f"{KEY}.v1") == first
    third = write(tmp_path)
    assert third.older == tmp_path / f"{KEY}.v2"
    assert bytes_in(tmp_path / KEY) == first
    assert verify_folder(tmp_path) == ()
    assert names_in(tmp_path) == [KEY, f"{KEY}.v1", f"{KEY}.v2"]


def test_damaged_result_is_kept_aside_and_made_anew(tmp_path):
    write(tmp_path)
    (tmp_path / KEY / "report.pdf").write_bytes(b"changed")
    assert write(tmp_path).older == tmp_path / f"{KEY}.v1"
    assert verify_folder(tmp_path / KEY) == ()
    assert (tmp_path / f"{KEY}.v1" / "report.pdf").read_bytes() == b"changed"


def test_is_already_made_only_for_the_same_whole_result(tmp_path):
    assert not is_already_made(tmp_path / KEY, provenance())
    write(tmp_path)
    assert is_already_made(tmp_path / KEY, provenance())
    assert not is_already_made(tmp_path / KEY, provenance(software={"liverfe": "0.2.0"}))
    (tmp_path / KEY / "result.json").unlink()
    assert not is_already_made(tmp_path / KEY, provenance())


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


@pytest.mark.parametrize("path", ["../x", "/etc/x", "a/../x", "a\\x", "C:x", "", ".hidden", "a//b"])
def test_output_path_cannot_leave_its_folder(path):
    with pytest.raises(ValueError, match="plain relative path"):
        OutputFile(path=path, content=b"")


@pytest.mark.parametrize(
    "files", [(*FILES, FILES[0]), (OutputFile(path="manifest.json", content=b""),)]
)
def test_two_files_of_one_name_are_a_mistake(tmp_path, files):
    with pytest.raises(ValueError, match="path of its own"):
        write(tmp_path, files=files)
    assert names_in(tmp_path) == []


def test_fingerprint_is_that_of_coreutils_and_names_no_file(tmp_path):
    path = tmp_path / "Quixley_Zelda.dcm"
    path.write_bytes(b"abc")
    made = fingerprint(path, role="image")
    # SHA-256 of "abc": FIPS 180-4, example B.1.
    assert made.sha256 == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    assert made.n_bytes == 3
    assert "quixley" not in repr(made).lower()


def test_manifest_does_not_tell_in_which_order_or_under_which_names_files_were_read(tmp_path):
    other = InputFile(role="image", sha256="00" * 32, n_bytes=1)
    assert provenance(inputs=[IMAGE, other]) == provenance(inputs=[other, IMAGE])


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
