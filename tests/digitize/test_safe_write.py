"""A set of files is there whole or not at all, and never in place of another unless asked."""

import os
from pathlib import Path

import pytest

from digitize.errors import CannotWrite, OutputExists
from digitize.safe_write import write_files


def names(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


def test_writes_all_and_leaves_nothing_else(tmp_path):
    write_files({tmp_path / "a": b"1", tmp_path / "b": b"2"}, replace=False)
    assert names(tmp_path) == ["a", "b"]
    assert (tmp_path / "b").read_bytes() == b"2"


def test_makes_the_folder(tmp_path):
    write_files({tmp_path / "new" / "er" / "a": b"1"}, replace=False)
    assert (tmp_path / "new" / "er" / "a").read_bytes() == b"1"


def test_refuses_to_replace_and_then_writes_none_of_the_set(tmp_path):
    (tmp_path / "b").write_bytes(b"old")
    with pytest.raises(OutputExists, match="--replace"):
        write_files({tmp_path / "a": b"1", tmp_path / "b": b"2"}, replace=False)
    assert names(tmp_path) == ["b"]
    assert (tmp_path / "b").read_bytes() == b"old"


def test_replaces_when_asked(tmp_path):
    (tmp_path / "b").write_bytes(b"old")
    write_files({tmp_path / "b": b"new"}, replace=True)
    assert (tmp_path / "b").read_bytes() == b"new"


def test_a_dangling_link_counts_as_there(tmp_path):
    (tmp_path / "a").symlink_to(tmp_path / "nowhere")
    with pytest.raises(OutputExists):
        write_files({tmp_path / "a": b"1"}, replace=False)


def test_full_disk_leaves_nothing_half_written(tmp_path, monkeypatch):
    def full(number: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(CannotWrite, match="No space left on device"):
        write_files({tmp_path / "a": b"1", tmp_path / "b": b"2"}, replace=False)
    assert names(tmp_path) == []


def test_a_file_in_place_of_the_folder(tmp_path):
    (tmp_path / "out").write_bytes(b"")
    with pytest.raises(CannotWrite, match="-o"):
        write_files({tmp_path / "out" / "a": b"1"}, replace=False)


def test_others_may_read_what_was_written(tmp_path):
    mask = os.umask(0o022)
    try:
        write_files({tmp_path / "a": b"1"}, replace=False)
    finally:
        os.umask(mask)
    assert (tmp_path / "a").stat().st_mode & 0o777 == 0o644
