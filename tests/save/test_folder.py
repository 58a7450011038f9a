"""Results in their folders: first at the top, later ones numbered, none overwritten, and disks that fail."""

from __future__ import annotations

import errno
import os
from pathlib import Path

import numpy as np
import pytest
import skrf

from benchrun.derive.results import OnePortData, Results, Table
from benchrun.errors import DiskError, FolderError
from benchrun.save import save_results
from benchrun.save.files import safe_name, write_whole

F = np.array([2.2e9, 2.3e9])


def results(value=0.3, drives=(14.0, 15.0)) -> Results:
    networks = tuple(
        OnePortData(q, "0042", {"drive_dbm": d}, F, np.full(2, value + 0j), ("one line",))
        for d in drives
        for q in ("S22", "T22")
    )
    return Results((Table("hot-match", {"drive_dbm": np.array(drives)}),), networks, {}, ("a note",), {})


def tree(folder: Path) -> list[str]:
    return sorted(p.relative_to(folder).as_posix() for p in folder.rglob("*") if p.is_file())


def test_the_first_result_stands_at_the_top(tmp_path):
    assert save_results(results(), tmp_path) == tmp_path
    assert tree(tmp_path) == [
        "notes.txt",
        "summary.csv",
        "touchstone/0042_p14.0dBm_S22.s1p",
        "touchstone/0042_p14.0dBm_T22.s1p",
        "touchstone/0042_p15.0dBm_S22.s1p",
        "touchstone/0042_p15.0dBm_T22.s1p",
    ]


def test_later_results_are_numbered_and_the_old_ones_left(tmp_path):
    save_results(results(), tmp_path)
    before = {p: p.read_bytes() for p in tmp_path.rglob("*") if p.is_file()}
    assert save_results(results(0.5), tmp_path) == tmp_path / "result-002"
    assert save_results(results(0.6), tmp_path) == tmp_path / "result-003"
    assert all(p.read_bytes() == content for p, content in before.items())
    network = skrf.Network(str(tmp_path / "result-002" / "touchstone" / "0042_p14.0dBm_S22.s1p"))
    assert network.s[0, 0, 0] == 0.5


def test_only_what_is_wanted(tmp_path):
    save_results(results(), tmp_path, kinds=["summary"])
    assert tree(tmp_path) == ["notes.txt", "summary.csv"]


def test_two_results_of_one_name_are_refused(tmp_path):
    with pytest.raises(FolderError, match=r"two results would be called 0042_p14\.0dbm_s22\.s1p"):
        save_results(results(drives=(14.0, 14.00001)), tmp_path)
    assert tree(tmp_path) == []


def failing(monkeypatch, at, number):
    """Let the call `at` of os.fsync fail with `number`; return how often it was called."""
    calls = []
    real = os.fsync

    def fsync(handle):
        calls.append(handle)
        if len(calls) == at:
            raise OSError(number, os.strerror(number))
        real(handle)

    monkeypatch.setattr(os, "fsync", fsync)
    return calls


@pytest.mark.parametrize("at", range(1, 7))
def test_a_full_disk_at_any_file_leaves_whole_files_only(tmp_path, monkeypatch, at):
    failing(monkeypatch, at, errno.ENOSPC)
    with pytest.raises(DiskError, match="The archive has all readings"):
        save_results(results(), tmp_path)
    assert len(tree(tmp_path)) == at - 1
    assert not [name for name in tree(tmp_path) if "/." in f"/{name}"]
    monkeypatch.undo()
    again = save_results(results(), tmp_path)
    assert len(tree(again)) >= 6


def test_a_folder_that_may_not_be_written(tmp_path, monkeypatch):
    failing(monkeypatch, 1, errno.EACCES)
    with pytest.raises(FolderError, match="Choose a folder that you may write to"):
        save_results(results(), tmp_path)


def test_a_file_where_a_folder_is_needed(tmp_path):
    (tmp_path / "run").write_text("")
    with pytest.raises(FolderError, match="could not be written"):
        write_whole(tmp_path / "run" / "summary.csv", "x")


def test_a_file_is_replaced_whole(tmp_path):
    path = tmp_path / "x.csv"
    write_whole(path, "first")
    write_whole(path, "second\r\n")
    assert path.read_bytes() == b"second\r\n"
    assert tree(tmp_path) == ["x.csv"]


@pytest.mark.skipif(os.name == "nt", reason="no such modes there")
def test_files_can_be_read_by_whom_the_mask_allows(tmp_path):
    mask = os.umask(0o022)
    try:
        write_whole(tmp_path / "x", "")
    finally:
        os.umask(mask)
    assert (tmp_path / "x").stat().st_mode & 0o777 == 0o644


@pytest.mark.parametrize(("text", "name"), [("0042", "0042"), ("a b/c", "a-b-c"), ("..", "unnamed"), ("", "unnamed")])
def test_safe_names(text, name):
    assert safe_name(text) == name
