"""Files appear whole or not at all."""

from __future__ import annotations

import os
import stat

import pytest

from flatplan.show import files
from flatplan.show.files import write_all, write_bytes, write_text


def test_text_is_utf8_with_plain_line_feeds(tmp_path):
    path = write_text(tmp_path / "rates.csv", "rate [m³/h]\n1\n")
    assert path == tmp_path / "rates.csv"
    assert path.read_bytes() == "rate [m³/h]\n1\n".encode()
    assert os.listdir(tmp_path) == ["rates.csv"]


def test_an_existing_file_is_replaced_whole(tmp_path):
    path = tmp_path / "a.bin"
    path.write_bytes(b"x" * 1000)
    write_bytes(str(path), b"short")
    assert path.read_bytes() == b"short"
    assert os.listdir(tmp_path) == ["a.bin"]


@pytest.mark.skipif(os.name == "nt", reason="permissions of POSIX")
def test_permissions_are_the_users_own(tmp_path):
    mask = os.umask(0o027)
    try:
        path = write_bytes(tmp_path / "a", b"1")
    finally:
        os.umask(mask)
    assert stat.S_IMODE(path.stat().st_mode) == 0o640


@pytest.mark.parametrize("step", ["replace", "fsync"])
def test_a_failure_leaves_the_old_file_and_nothing_else(tmp_path, monkeypatch, step):
    def fail(*_: object) -> None:
        raise OSError("the disk is full")

    (tmp_path / "a.txt").write_text("old")
    monkeypatch.setattr(files.os, step, fail)
    with pytest.raises(OSError, match="^the disk is full$"):
        write_text(tmp_path / "a.txt", "new")
    monkeypatch.undo()
    assert os.listdir(tmp_path) == ["a.txt"]
    assert (tmp_path / "a.txt").read_text() == "old"


def test_a_long_name_still_has_a_temporary_file(tmp_path):
    name = "n" * 250
    assert write_bytes(tmp_path / name, b"1").name == name


def test_bad_paths_and_contents(tmp_path):
    with pytest.raises(TypeError, match="^path: got int; it takes the name of a file to write.$"):
        write_text(3, "x")
    with pytest.raises(TypeError, match="^path: got ''; it takes the name of a file to write.$"):
        write_text("", "x")
    with pytest.raises(TypeError, match="^path: got bytes; it takes"):
        write_text(b"a", "x")
    with pytest.raises(FileNotFoundError, match="^path: got '.*, whose folder does not exist; make the folder first.$"):
        write_text(tmp_path / "missing" / "a", "x")
    with pytest.raises(IsADirectoryError, match="^path: got .* which is a folder; it takes the name of a file to write.$"):
        write_text(tmp_path, "x")
    with pytest.raises(TypeError, match="^text: got bytes; it takes text.$"):
        write_text(tmp_path / "a", b"x")
    with pytest.raises(TypeError, match="^data: got str; it takes bytes.$"):
        write_bytes(tmp_path / "a", "x")
    assert os.listdir(tmp_path) == []


def test_several_files_under_one_folder(tmp_path):
    folder = tmp_path / "made" / "here"
    files_there = {"b.csv": b"1\n", "a.html": b"<p>"}
    assert write_all(folder, files_there) == [folder / "b.csv", folder / "a.html"]
    assert {name: (folder / name).read_bytes() for name in os.listdir(folder)} == files_there
    assert write_all(str(folder), {"b.csv": b"2\n"}) == [folder / "b.csv"]
    assert (folder / "b.csv").read_bytes() == b"2\n" and len(os.listdir(folder)) == 2


def test_when_one_of_several_fails_none_is_there(tmp_path, monkeypatch):
    """The third file does not fit on the disk: the first two do not appear, and the folders made for them go."""
    calls = []

    def fsync(_: int) -> None:
        calls.append(1)
        if len(calls) == 3:
            raise OSError("the disk is full")

    monkeypatch.setattr(files.os, "fsync", fsync)
    with pytest.raises(OSError, match="^the disk is full$"):
        write_all(tmp_path / "made" / "here", {"a": b"1", "b": b"2", "c": b"3"})
    assert os.listdir(tmp_path) == []
    (tmp_path / "old").mkdir()
    (tmp_path / "old" / "a").write_bytes(b"old")
    calls.clear()
    with pytest.raises(OSError, match="^the disk is full$"):
        write_all(tmp_path / "old", {"a": b"1", "b": b"2", "c": b"3"})
    assert os.listdir(tmp_path / "old") == ["a"] and (tmp_path / "old" / "a").read_bytes() == b"old"


@pytest.mark.parametrize("name", ["../a", "a/b", "", ".", "..", "a\0", "a\\b", 3])
def test_only_plain_names_go_into_a_folder(tmp_path, name):
    with pytest.raises(ValueError, match="^files: got .*; it takes plain file names, without a folder.$"):
        write_all(tmp_path / "new", {"good": b"1", name: b"2"})
    assert os.listdir(tmp_path) == []


def test_contents_and_folder_of_another_type(tmp_path):
    with pytest.raises(TypeError, match="^files\\['a'\\]: got str; it takes bytes.$"):
        write_all(tmp_path / "new", {"a": "text"})
    with pytest.raises(TypeError, match="^folder: got 3; it takes the name of a folder.$"):
        write_all(3, {})
    (tmp_path / "file").write_text("x")
    with pytest.raises(OSError):
        write_all(tmp_path / "file", {"a": b"1"})
    assert os.listdir(tmp_path) == ["file"]
