"""`verify_folder` finds every way in which a folder is not what was written."""

import os
import random
import sys

import pytest

from liverfe.errors import UsageError
from liverfe.export import OutputFile, lock_folder, provenance_of, verify_folder, write_result
from liverfe.export.manifest import InputFile

KEY, OTHER = "0123456789abcdef", "fedcba9876543210"
FILES = (
    OutputFile(path="result.json", content=b'{"lic": 7.97}\n'),
    OutputFile(path="maps/a_R2starmap.nii.gz", content=bytes(range(64))),
)


@pytest.fixture
def folder(tmp_path):
    """A result folder as it was written."""
    for key in (KEY, OTHER):
        provenance = provenance_of(
            key=key, method={"id": "house"}, software={"liverfe": "0.1.0"},
            inputs=[InputFile(role="image", sha256="ab" * 32, n_bytes=3)],
        )  # fmt: skip
        with lock_folder(tmp_path / key) as locked:
            write_result(locked, FILES, provenance)
    return tmp_path / KEY


def kinds(path):
    """What is wrong, in short."""
    return [(difference.path, difference.kind) for difference in verify_folder(path)]


def test_untouched_folder_and_its_parent_have_no_difference(folder):
    assert verify_folder(folder) == verify_folder(folder.parent) == ()


@pytest.mark.parametrize("name", ["result.json", "maps/a_R2starmap.nii.gz"])
def test_any_changed_byte_of_a_file_is_found(folder, name):
    whole = (folder / name).read_bytes()
    for place in range(len(whole)):
        flipped = bytearray(whole)
        flipped[place] ^= 1 << (place % 8)
        (folder / name).write_bytes(flipped)
        assert kinds(folder) == [(name, "changed")]
    (folder / name).write_bytes(whole)
    assert kinds(folder) == []


def test_any_changed_byte_of_the_manifest_is_found(folder):
    path = folder / "manifest.json"
    whole = path.read_bytes()
    chance = random.Random(0)
    for place in range(len(whole)):
        spoilt = bytearray(whole)
        spoilt[place] ^= 1 << chance.randrange(8)
        path.write_bytes(spoilt)
        assert kinds(folder) == [("manifest.json", "unreadable")], place
    for other in (whole[:-1], whole + b"\n", whole[:50], b"", b"[]\n", b"\xff"):
        path.write_bytes(other)
        assert kinds(folder) == [("manifest.json", "unreadable")]


def test_cut_grown_missing_and_extra_files_are_found(folder):
    (folder / "result.json").write_bytes(b"")
    (folder / "maps" / "a_R2starmap.nii.gz").unlink()
    (folder / "maps" / "new.txt").write_text("x")
    assert kinds(folder) == [
        ("maps/a_R2starmap.nii.gz", "missing"),
        ("maps/new.txt", "extra"),
        ("result.json", "changed"),
    ]
    words = [difference.text for difference in verify_folder(folder)]
    assert words[2] == f"{KEY}/result.json is not what the manifest says"


@pytest.mark.skipif(sys.platform == "win32", reason="links need a privilege there")
def test_file_replaced_by_a_link_to_the_same_bytes_is_a_change(folder, tmp_path):
    kept = tmp_path / "kept"
    os.replace(folder / "result.json", kept)
    (folder / "result.json").symlink_to(kept)
    (folder / "more").symlink_to(tmp_path, target_is_directory=True)
    assert kinds(folder) == [("more", "extra"), ("result.json", "changed")]


def test_folder_without_a_manifest_is_unfinished(folder):
    (folder / "manifest.json").unlink()
    assert kinds(folder) == kinds(folder.parent) == [("manifest.json", "unfinished")]


def test_empty_folder_of_a_study_is_unfinished(folder):
    (folder.parent / "00000000000000aa-2").mkdir()
    found = verify_folder(folder.parent)
    assert [(d.folder, d.kind) for d in found] == [("00000000000000aa-2", "unfinished")]


def test_what_a_batch_keeps_beside_its_results_is_no_result(folder):
    (folder.parent / "regions" / KEY).mkdir(parents=True)
    (folder.parent / "summary.csv").write_text("key\n")
    assert verify_folder(folder.parent) == ()


def test_looking_at_a_folder_does_not_change_it(folder):
    (folder / ".DS_Store").write_bytes(b"x")
    (folder / "maps" / "Thumbs.db").write_bytes(b"x")
    assert verify_folder(folder) == ()


@pytest.mark.parametrize("name", ["empty", "not there"])
def test_nothing_to_verify_is_an_error_not_a_pass(tmp_path, name):
    (tmp_path / "empty").mkdir()
    with pytest.raises(UsageError, match="no result folder here"):
        verify_folder(tmp_path / name)


def test_manifest_cannot_send_the_reader_out_of_the_folder(folder):
    from liverfe.export import manifest

    content = manifest.read_manifest((folder / "manifest.json").read_bytes())
    content["outputs"][0]["path"] = "../../secret"
    forged = {**content, "manifest_sha256": manifest._own_hash(content)}
    (folder / "manifest.json").write_bytes(manifest._to_bytes(forged))
    assert kinds(folder) == [("manifest.json", "unreadable")]


def test_file_that_cannot_be_read_is_named(folder, monkeypatch):
    real = type(folder).open

    def broken(self, *args, **kwargs):
        if self.name == "result.json":
            raise OSError(5, "Input/output error")
        return real(self, *args, **kwargs)

    monkeypatch.setattr(type(folder), "open", broken)
    assert kinds(folder) == [("result.json", "unreadable")]
