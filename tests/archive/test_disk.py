"""Disks that are full or fail: a DiskError that says what is safe, and all that was committed still there.

A virtual file system under the product's own SQLite lets write or sync number n fail, for every n.
"""

from __future__ import annotations

import contextlib
from itertools import count
from pathlib import Path
from typing import Any

import apsw
import pytest

from benchrun.archive import ArchiveWriter, Event, open_archive
from benchrun.errors import DiskError
from tests.archive.readings import META, reading, same

READINGS = 6


class FailingFile(apsw.VFSFile):
    """A file whose writes and syncs are counted, and fail where its disk says so."""

    def __init__(self, disk: FailingDisk, name: Any, flags: list[int]) -> None:
        self._disk = disk
        super().__init__("", name, flags)

    def xWrite(self, data: bytes, offset: int) -> None:
        self._disk.count()
        super().xWrite(data, offset)

    def xSync(self, flags: int) -> None:
        self._disk.count()
        super().xSync(flags)


class FailingDisk(apsw.VFS):
    """Fails at operation `fail_at`, once or from then on (`stays`), with SQLite's own error."""

    _names = count()

    def __init__(self, fail_at: int | None, error: type[apsw.Error] = apsw.FullError, *, stays: bool = True) -> None:
        self.name = f"failing-{next(self._names)}"
        self.operations = 0
        self.fail_at = fail_at
        self.error = error
        self.stays = stays
        super().__init__(self.name, "", iVersion=1)

    def count(self) -> None:
        n, self.operations = self.operations, self.operations + 1
        if self.fail_at is not None and (n == self.fail_at or (self.stays and n > self.fail_at)):
            error = self.error("planned")
            error.extendedresult = {apsw.FullError: apsw.SQLITE_FULL, apsw.IOError: apsw.SQLITE_IOERR_WRITE}[self.error]
            raise error

    def xOpen(self, name: Any, flags: list[int]) -> apsw.VFSFile:
        return FailingFile(self, name, flags)


def write_all(folder: Path, disk: FailingDisk) -> tuple[int, DiskError | None]:
    """Commit readings until the disk fails; return how many commits had returned, and the error."""
    safe = 0
    writer = None
    try:
        writer = ArchiveWriter.create(folder, META, vfs=disk.name)
        for k in range(READINGS):
            writer.commit(reading(k))
            safe += 1
        writer.log(Event("note", "all done"))
        writer.close("complete")
    except DiskError as error:
        if writer is not None:
            with contextlib.suppress(DiskError):
                writer.close("failed")
        return safe, error
    return safe, None


def operations(tmp_path: Path) -> int:
    disk = FailingDisk(None)
    assert write_all(tmp_path / "whole", disk) == (READINGS, None)
    return disk.operations


@pytest.mark.parametrize("stays", [True, False])
@pytest.mark.parametrize("error", [apsw.FullError, apsw.IOError])
@pytest.mark.filterwarnings("ignore::pytest.PytestUnraisableExceptionWarning")
def test_any_write_or_sync_may_fail(error: type[apsw.Error], stays: bool, tmp_path: Path) -> None:
    whole = operations(tmp_path)
    assert whole > 3 * READINGS
    failed = 0
    for n in range(whole):
        folder = tmp_path / f"{n}"
        safe, raised = write_all(folder, FailingDisk(n, error, stays=stays))
        if raised is not None:
            failed += 1
            words = "the disk is full" if error is apsw.FullError else "the disk failed"
            assert words in str(raised)
            assert f"{safe} readings are safe" in str(raised)
        if not (folder / "archive.sqlite").exists():
            assert safe == 0
            continue
        with open_archive(folder) as reader:
            assert reader.check() == []
            found = list(reader.readings())
            assert safe <= len(found) <= safe + 1
            assert all(same(one, reading(k)) for k, one in enumerate(found))
    assert failed >= whole - 2 * READINGS


def test_after_room_was_made_the_writer_goes_on(tmp_path: Path) -> None:
    disk = FailingDisk(None)
    writer = ArchiveWriter.create(tmp_path, META, vfs=disk.name)
    writer.commit(reading(0))
    disk.fail_at = disk.operations
    for _ in range(3):
        with pytest.raises(
            DiskError, match=r"reading 1 'hot'\): the disk is full. 1 readings are safe in it. Make room"
        ):
            writer.commit(reading(1))
    disk.fail_at = None
    writer.commit(reading(1))
    writer.close("complete")
    with open_archive(tmp_path) as reader:
        assert (reader.count, reader.check()) == (2, [])


def commit_until_full(writer: ArchiveWriter) -> None:
    for k in range(1000):
        writer.commit(reading(k))


def test_sqlite_itself_says_full(tmp_path: Path) -> None:
    writer = ArchiveWriter.create(tmp_path, META)
    pages = writer._connection.pragma("page_count")
    writer._connection.pragma("max_page_count", pages + 3)
    with pytest.raises(DiskError, match="the disk is full") as caught:
        commit_until_full(writer)
    safe = writer.readings
    assert safe > 3
    assert f"{safe} readings are safe" in str(caught.value)
    writer.close("failed")
    with open_archive(tmp_path) as reader:
        assert (reader.count, reader.check(), reader.meta.state) == (safe, [], "failed")


def test_nothing_is_left_of_an_archive_that_could_not_be_begun(tmp_path: Path) -> None:
    with pytest.raises(DiskError):
        ArchiveWriter.create(tmp_path, META, vfs=FailingDisk(0).name)
    ArchiveWriter.create(tmp_path, META).close()


def test_a_folder_that_may_not_be_written(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refused(_folder: Path) -> int:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("benchrun.archive.media._take", refused)
    with pytest.raises(DiskError, match=r"cannot be written .*Permission denied.*Choose another folder"):
        ArchiveWriter.create(tmp_path, META)
