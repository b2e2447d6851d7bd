"""Compiled kernels are kept between processes, and what befalls the files changes no number."""

from __future__ import annotations

import errno
import importlib.util
import multiprocessing
import os
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path
from typing import Any

import numba
import pytest

from liverfe.fit import compiled

pytestmark = pytest.mark.slow

KERNEL = """
from liverfe.fit.compiled import compiled

@compiled(error_model="numpy")
def weigh(x):
    return 2.0 * x + 1.0
"""


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with one kernel in it, which has not been compiled yet."""
    monkeypatch.setattr(numba.config, "CACHE_DIR", "")
    (tmp_path / "scales.py").write_text(KERNEL, encoding="utf-8")
    return tmp_path


def decorated(folder: Path) -> Any:
    """The kernel as a new process has it: decorated, and neither compiled nor loaded."""
    spec = importlib.util.spec_from_file_location("scales", folder / "scales.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module.weigh


def call(folder: Path) -> str:
    """Call the kernel as a new process would; say whether its code was compiled or taken."""
    kernel = decorated(folder)
    assert kernel(20.5) == 42.0  # 2 x 20.5 + 1
    return "taken" if kernel.stats.cache_hits else "compiled"


def kept_files(folder: Path) -> list[Path]:
    return sorted(folder.rglob("*.nbc"))


def test_the_second_process_does_not_compile_again(folder: Path) -> None:
    assert call(folder) == "compiled"
    assert call(folder) == "taken"


def test_a_change_of_any_file_of_the_room_compiles_anew_and_leaves_no_old_code(
    folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    # numba itself looks at the kernel's own file alone; constants of others are compiled in too.
    call(folder)
    monkeypatch.setattr(compiled, "room_stamp", lambda: 64 * "f")
    assert call(folder) == "compiled"
    assert call(folder) == "taken"
    assert len(kept_files(folder)) == 1


def test_the_stamp_follows_each_source_file_of_the_room(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (tmp_path / "a_room" / "parts").mkdir(parents=True)
    files = ("__init__.py", "constants.py", "parts/more.py")
    for name in files:
        (tmp_path / "a_room" / name).write_text("LEVEL = 1\n", encoding="utf-8")
    monkeypatch.syspath_prepend(tmp_path)
    monkeypatch.setattr(compiled, "_ROOM", "a_room")
    stamps = {compiled.room_stamp.__wrapped__()}
    for name in files:
        (tmp_path / "a_room" / name).write_text("LEVEL = 2\n", encoding="utf-8")
        stamps.add(compiled.room_stamp.__wrapped__())
    assert len(stamps) == 1 + len(files)


@pytest.mark.parametrize("ending", ["nbc", "nbi"])
@pytest.mark.parametrize("fault", ["cut off", "emptied", "one bit turned"])
def test_a_damaged_file_counts_as_not_there_and_is_replaced(
    folder: Path, fault: str, ending: str
) -> None:
    # Code and index.
    call(folder)
    (path,) = folder.rglob(f"*.{ending}")
    whole = path.read_bytes()
    damaged = {
        "cut off": whole[: len(whole) // 2],
        "emptied": b"",
        "one bit turned": whole[:-100] + bytes([whole[-100] ^ 1]) + whole[-99:],
    }
    path.write_bytes(damaged[fault])
    assert call(folder) == "compiled"
    assert call(folder) == "taken"


def test_code_for_other_arguments_is_not_taken_whatever_the_index_says(folder: Path) -> None:
    # Two processes that write at once can leave the index of one with the code of the other.
    kernel = decorated(folder)
    kernel(1.0)
    kernel(1)
    one, other = kept_files(folder)
    swapped = one.read_bytes(), other.read_bytes()
    other.write_bytes(swapped[0])
    one.write_bytes(swapped[1])
    assert call(folder) == "compiled"
    assert call(folder) == "taken"


def test_a_full_disk_costs_the_cache_and_not_the_fit(
    folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def refuse(*_: object) -> None:
        raise OSError(errno.ENOSPC, "no space")

    monkeypatch.setattr(os, "replace", refuse)
    assert call(folder) == "compiled"
    assert [path for path in (folder / "__pycache__").iterdir() if "weigh" in path.name] == []


def test_without_any_folder_to_write_to_the_kernel_works_all_the_same(
    folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    # As in a read-only container under a user without a home; a warning would be an error here.
    (folder / "__pycache__").write_text("no folder", encoding="utf-8")
    for name in ("HOME", "XDG_CACHE_HOME", "LOCALAPPDATA", "USERPROFILE"):
        monkeypatch.setenv(name, str(folder / "scales.py" / "below"))
    assert call(folder) == "compiled"
    assert call(folder) == "compiled"


def test_where_the_package_lies_read_only_the_folder_that_is_named_is_taken(
    folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (folder / "__pycache__").write_text("no folder", encoding="utf-8")
    monkeypatch.setattr(numba.config, "CACHE_DIR", str(folder / "cache"))
    assert call(folder) == "compiled"
    assert call(folder) == "taken"


def test_processes_that_compile_at_once_do_not_disturb_each_other(folder: Path) -> None:
    with ProcessPoolExecutor(3, mp_context=multiprocessing.get_context("spawn")) as pool:
        for done in [pool.submit(call, folder) for _ in range(3)]:
            assert done.result(timeout=120) in ("compiled", "taken")
    # On a busy machine one may have thrown away what another was about to keep: that costs one
    # more compilation, and no more.
    assert "taken" in (call(folder), call(folder))
    assert len(kept_files(folder)) == 1


def test_without_the_compiler_the_plain_function_stands(
    folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(numba.config, "DISABLE_JIT", True)
    assert decorated(folder)(20.5) == 42.0


def test_no_kernel_of_the_package_is_kept_by_numba_itself(repository: Path) -> None:
    # Its cache would go on using a kernel after a file that it takes constants from has changed.
    found = [
        path.name
        for path in (repository / "liverfe").rglob("*.py")
        if path.name != "compiled.py" and "cache=True" in path.read_text(encoding="utf-8")
    ]
    assert found == []
