"""Files that are whole or not there."""

from __future__ import annotations

import errno
import os
from pathlib import Path

import pytest

from kickrender.errors import WriteError
from kickrender.sound.files import sweep_unfinished, write_whole


def test_pieces_become_one_file_and_nothing_else_is_left(tmp_path):
    write_whole(tmp_path / "a.bin", b"one", b"", b"two")
    assert (tmp_path / "a.bin").read_bytes() == b"onetwo"
    assert os.listdir(tmp_path) == ["a.bin"]


def test_a_file_is_replaced(tmp_path):
    for content in (b"first, longer", b"second"):
        write_whole(tmp_path / "a.bin", content)
    assert (tmp_path / "a.bin").read_bytes() == b"second"


def test_the_permissions_are_those_of_any_new_file(tmp_path):
    (tmp_path / "plain").write_bytes(b"")
    write_whole(tmp_path / "a.bin", b"x")
    assert (tmp_path / "a.bin").stat().st_mode == (tmp_path / "plain").stat().st_mode


def test_no_such_folder(tmp_path):
    with pytest.raises(WriteError, match=r"missing.a\.bin: No such file or directory"):
        write_whole(tmp_path / "missing" / "a.bin", b"x")


def test_a_folder_of_that_name(tmp_path):
    (tmp_path / "a.bin").mkdir()
    with pytest.raises(WriteError, match=r"a\.bin: "):
        write_whole(tmp_path / "a.bin", b"x")
    assert os.listdir(tmp_path) == ["a.bin"]


@pytest.mark.parametrize("older", [None, b"older"])
def test_a_full_disk_leaves_the_older_file(tmp_path, monkeypatch, older):
    def full(*_: object) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    path = tmp_path / "a.bin"
    if older:
        path.write_bytes(older)
    monkeypatch.setattr(os, "replace", full)
    with pytest.raises(WriteError, match="No space left on device"):
        write_whole(path, b"newer")
    assert os.listdir(tmp_path) == (["a.bin"] if older else [])
    assert older is None or path.read_bytes() == older


def test_an_interrupt_leaves_nothing(tmp_path, monkeypatch):
    def interrupt(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(os, "replace", interrupt)
    with pytest.raises(KeyboardInterrupt):
        write_whole(tmp_path / "a.bin", b"x")
    assert os.listdir(tmp_path) == []


def test_it_is_whole_before_it_has_its_name(tmp_path, monkeypatch):
    sizes: list[int] = []
    replace = os.replace
    monkeypatch.setattr(os, "replace", lambda a, b: (sizes.append(Path(a).stat().st_size), replace(a, b))[1])
    write_whole(tmp_path / "a.bin", b"xy", b"z" * 100_000)
    assert sizes == [100_002]


def test_sweeping_takes_only_what_a_killed_run_left(tmp_path, monkeypatch):
    """The names that unfinished files have are caught in the act."""
    names: list[Path] = []
    below = tmp_path / "below"
    below.mkdir()
    monkeypatch.setattr(os, "replace", lambda beside, path: names.append(Path(beside)))
    for folder in (tmp_path, below):
        write_whole(folder / "a.wav", b"x")
    for name in names:
        name.write_bytes(b"half")
    kept = [tmp_path / ".kick-notes.part", below / "song.part", tmp_path / ".hidden"]
    for path in kept:
        path.write_bytes(b"mine")
    sweep_unfinished(tmp_path)
    assert len(names) == 2
    assert not any(name.exists() for name in names)
    assert all(path.exists() for path in kept)
