"""A result folder is there whole or not there; an older one is never lost; a second run waits."""

import gzip

import pytest

from liverfe.export import (
    InputFile,
    OutputFile,
    fingerprint,
    is_already_made,
    verify_folder,
)
from tests.export.folders import FILES, IMAGE, KEY, bytes_in, names_in, provenance, write


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
