"""Whole files or none, in plain words when it fails."""

import errno
import json
import os

import numpy as np
import pytest

from coldseam.errors import OutputError
from coldseam.report import files


def leftovers(folder):
    return sorted(path.name for path in folder.iterdir())


def test_files_are_written_and_replaced(tmp_path):
    files.write_files(tmp_path, {"a.txt": b"one", "b.txt": b"two"})
    files.write_files(tmp_path, {"a.txt": b"three"})
    assert (tmp_path / "a.txt").read_bytes() == b"three"
    assert leftovers(tmp_path) == ["a.txt", "b.txt"]


def test_a_full_disk_leaves_what_was_there(tmp_path, monkeypatch):
    files.write_text(tmp_path / "a.txt", "old")
    real, calls = os.write, []

    def full(handle, data):
        calls.append(len(data))
        if len(calls) == 1:
            return real(handle, data[: len(data) // 2])  # half goes through, then the disk is full
        raise OSError(errno.ENOSPC, "No space left on device")

    monkeypatch.setattr(os, "write", full)
    with pytest.raises(OutputError, match="could not be written: the disk is full"):
        files.write_files(tmp_path, {"a.txt": b"new and longer", "b.txt": b"new"})
    monkeypatch.undo()
    assert len(calls) == 2
    assert (tmp_path / "a.txt").read_text() == "old"
    assert leftovers(tmp_path) == ["a.txt"]


def test_a_fault_in_the_second_file_keeps_the_first_old(tmp_path, monkeypatch):
    files.write_files(tmp_path, {"a": b"old", "b": b"old"})
    real = os.write

    def fails_on_b(handle, data):
        if bytes(data) == b"new b":
            raise OSError(errno.EIO, "Input/output error")
        return real(handle, data)

    monkeypatch.setattr(os, "write", fails_on_b)
    with pytest.raises(OutputError, match="input/output error"):
        files.write_files(tmp_path, {"a": b"new a", "b": b"new b"})
    assert (tmp_path / "a").read_bytes() == b"old"
    assert leftovers(tmp_path) == ["a", "b"]


def test_a_failed_rename_leaves_no_half_file(tmp_path, monkeypatch):
    def refuse(source, target):
        raise OSError(errno.EROFS, "Read-only file system")

    monkeypatch.setattr(os, "replace", refuse)
    with pytest.raises(OutputError, match="read-only"):
        files.write_text(tmp_path / "a.txt", "new")
    assert leftovers(tmp_path) == []


def test_interrupting_leaves_no_half_file(tmp_path, monkeypatch):
    def interrupt(handle):
        raise KeyboardInterrupt

    monkeypatch.setattr(os, "fsync", interrupt)
    with pytest.raises(KeyboardInterrupt):
        files.write_text(tmp_path / "a.txt", "new")
    assert leftovers(tmp_path) == []


def test_a_read_only_folder_is_refused(tmp_path, monkeypatch):
    if os.geteuid() == 0:  # root may write anywhere: let the system call say no

        def refuse(*args, **named):
            raise OSError(errno.EACCES, "Permission denied")

        monkeypatch.setattr(files.tempfile, "mkstemp", refuse)
    else:
        tmp_path.chmod(0o500)
    with pytest.raises(OutputError, match="no permission to write there"):
        files.prepare_folder(tmp_path)


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="no /dev/full")
def test_the_system_itself_says_full():
    handle = os.open("/dev/full", os.O_WRONLY)
    with pytest.raises(OSError) as caught:
        files._fill(handle, b"x")
    assert "the disk is full" in str(files._plain(caught.value, files.Path("x")))


def test_a_file_in_place_of_the_folder_is_refused(tmp_path):
    (tmp_path / "out").write_text("")
    with pytest.raises(OutputError, match="is a file, not a folder"):
        files.prepare_folder(tmp_path / "out")
    with pytest.raises(OutputError):
        files.prepare_folder(tmp_path / "out" / "deeper")
    assert files.prepare_folder(tmp_path / "new" / "deep").is_dir()
    assert leftovers(tmp_path / "new" / "deep") == []


def test_answers_are_json_in_the_contracts_order_and_refuse_nan():
    text = files.answers_text(
        {
            "warnings": ["w"],
            "title": "t",
            "zzz": 1,
            "boundaries": {"b": {"heat_flow": float("nan")}, "a": np.float64(2)},
            "mesh": {"nodes": np.int64(3), "at": np.array([1.0, np.inf])},
        }
    )
    read = json.loads(text, parse_constant=lambda name: pytest.fail(name))
    assert text.endswith("}\n")
    assert list(read) == ["title", "mesh", "boundaries", "warnings", "zzz"]
    assert list(read["boundaries"]) == ["b", "a"]
    assert read["boundaries"]["b"]["heat_flow"] is None
    assert read["mesh"] == {"nodes": 3, "at": [1.0, None]}
    assert "boundaries.b.heat_flow is not a number and is written as null" in read["warnings"]
    assert "mesh.at[2] is infinite and is written as null" in read["warnings"]


def test_what_json_cannot_hold_is_an_error():
    with pytest.raises(TypeError, match="a.b"):
        files.answers_text({"a": {"b": object()}})
