"""Bytes of tidy tables, and files that appear whole or not at all."""

import os
import stat

import pandas as pd
import pytest

from steelyard.reports.writing import csv_bytes, write_atomically


def test_csv_golden():
    frame = pd.DataFrame(
        {
            "name": ["a,b", 'say "ü"', None],
            "value": [1 / 3, float("inf"), float("nan")],
            "count": [1, 12345678901234567, 3],
            "flag": [True, False, True],
            "maybe": pd.array([1, None, 3], dtype="Int64"),
        },
        index=[7, 8, 9],
    )
    assert (
        csv_bytes(frame)
        == (
            "name,value,count,flag,maybe\n"
            '"a,b",0.333333333333,1,true,1\n'
            '"say ""ü""",inf,12345678901234567,false,\n'
            ",,3,true,3\n"
        ).encode()
    )


def test_csv_without_rows_keeps_its_heading():
    assert csv_bytes(pd.DataFrame({"a": [], "b": []})) == b"a,b\n"


def test_replaces_and_leaves_nothing_else(tmp_path):
    path = tmp_path / "deep" / "x.txt"
    write_atomically(path, b"old")
    assert write_atomically(path, b"new") == path
    assert path.read_bytes() == b"new"
    assert [item.name for item in path.parent.iterdir()] == ["x.txt"]


def test_a_failed_write_leaves_the_old_file(tmp_path, monkeypatch):
    path = write_atomically(tmp_path / "x.txt", b"old")

    def full(_descriptor: int) -> None:
        raise OSError("no space left")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(OSError, match="no space left"):
        write_atomically(path, b"new")
    assert path.read_bytes() == b"old"
    assert [item.name for item in tmp_path.iterdir()] == ["x.txt"]


@pytest.mark.skipif(os.name != "posix", reason="file modes are POSIX")
def test_file_mode_follows_the_umask(tmp_path):
    before = os.umask(0o022)
    try:
        path = write_atomically(tmp_path / "x.txt", b"")
    finally:
        os.umask(before)
    assert stat.S_IMODE(path.stat().st_mode) == 0o644
