"""Opening what is absent, foreign, damaged, too new, or on a disk that cannot be written; and what check() finds."""

from __future__ import annotations

import re
from pathlib import Path

import apsw
import pytest

from benchrun.archive import ArchiveWriter, open_archive
from benchrun.errors import FolderError
from tests.archive.readings import META, reading


@pytest.fixture
def run(tmp_path: Path) -> Path:
    folder = tmp_path / "run"
    with ArchiveWriter.create(folder, META) as writer:
        for k in range(40):
            writer.commit(reading(k))
        writer.close("complete")
    return folder


def archive(run: Path) -> Path:
    return run / "archive.sqlite"


def test_the_folder_or_the_file(run: Path) -> None:
    for path in (run, archive(run)):
        with open_archive(path) as reader:
            assert reader.count == 40


def test_names_that_a_uri_would_misunderstand(tmp_path: Path) -> None:
    folder = tmp_path / "run #1 100%? ä&mode=ro"
    ArchiveWriter.create(folder, META).close()
    with open_archive(folder) as reader:
        assert reader.count == 0


@pytest.mark.parametrize("name", ["nothing", "empty"])
def test_no_run_here(tmp_path: Path, name: str) -> None:
    (tmp_path / "empty").mkdir()
    with pytest.raises(FolderError, match=r"there is no run here. A run folder holds archive.sqlite"):
        open_archive(tmp_path / name)


@pytest.mark.parametrize(
    "content", [b"", b"not a database", b"SQLite format 3\x00" + b"\xff" * 4096, b"%PDF-1.7" * 1000]
)
def test_a_foreign_file(tmp_path: Path, content: bytes) -> None:
    (tmp_path / "archive.sqlite").write_bytes(content)
    with pytest.raises(FolderError, match=r"archive.sqlite"):
        open_archive(tmp_path)


def test_another_programs_database(tmp_path: Path) -> None:
    apsw.Connection(str(tmp_path / "archive.sqlite")).execute("CREATE TABLE meta (key, value)")
    with pytest.raises(FolderError, match="not an archive of benchrun"):
        open_archive(tmp_path)


def test_a_later_version(run: Path) -> None:
    apsw.Connection(str(archive(run))).execute("PRAGMA user_version = 99")
    with pytest.raises(FolderError, match=r"later benchrun \(archive version 99"):
        open_archive(run)


def test_half_a_file(run: Path) -> None:
    content = archive(run).read_bytes()
    archive(run).write_bytes(content[: len(content) // 2 // 4096 * 4096])
    assert re.search("malformed|damaged", "\n".join(problems(run)))


def test_damage_is_found_unless_it_lies_where_nothing_is(run: Path) -> None:
    whole = archive(run).read_bytes()
    found = 0
    for at in range(0, len(whole), 512):
        archive(run).write_bytes(whole[:at] + b"\xa5" * 64 + whole[at + 64 :])
        if problems(run):
            found += 1
            continue
        with open_archive(run) as reader:
            assert [one.conditions for one in reader.readings()] == [reading(k).conditions for k in range(40)]
    assert found > len(whole) / 512 / 3


def problems(run: Path) -> list[str]:
    """Return what check() says, or what opening says."""
    try:
        with open_archive(run) as reader:
            return reader.check()
    except FolderError as error:
        return [str(error)]


TAMPERED = {
    "UPDATE reading SET conditions = '{}' WHERE schedule_index = 3": "reading 3 'hot'.*checksum",
    "UPDATE reading SET data = zeroblob(length(data)) WHERE schedule_index = 3": "reading 3 'hot'.*checksum",
    "UPDATE reading SET data = x'00' WHERE schedule_index = 3": "reading 3 'hot'.*checksum",
    "UPDATE reading SET started_utc = '' WHERE schedule_index = 3": "reading 3 'hot'.*checksum",
    'UPDATE layout SET waves = \'["a","b"]\'': "reading 0 'hot'.*checksum",
    "UPDATE reading SET layout = 77 WHERE schedule_index = 3": "points to nothing in layout",
    "UPDATE meta SET value = '10' WHERE key = 'readings_planned'": "30 readings are beyond the 10 that were planned",
    "DELETE FROM meta WHERE key = 'state'": "does not say",
}


@pytest.mark.parametrize("statement", TAMPERED)
def test_what_was_changed_afterwards_is_found(run: Path, statement: str) -> None:
    apsw.Connection(str(archive(run))).execute(statement)
    assert re.search(TAMPERED[statement], "\n".join(problems(run)))


def test_a_shape_that_does_not_fit_is_found_even_with_its_checksum(run: Path) -> None:
    from benchrun.archive.rows import Layout, Row, checksum
    from benchrun.archive.schema import ROWS

    connection = apsw.Connection(str(archive(run)))
    values = connection.execute(f"{ROWS} WHERE schedule_index = 3").fetchone()
    assert values is not None
    row = Row(*values[4:-1])._replace(shape="[3,2,7]")
    connection.execute(
        "UPDATE reading SET shape = ?, checksum = ? WHERE schedule_index = 3",
        (row.shape, checksum(Layout(*values[:4]), row)),
    )
    with open_archive(run) as reader:
        assert reader.check() == [
            "reading 3 'hot' attempt 0: shape [3, 2, 7], axes [3, 2, 1] and 96 bytes of waves do not fit together"
        ]


def test_meta_that_lacks_something_helps(run: Path) -> None:
    apsw.Connection(str(archive(run))).execute("DELETE FROM meta WHERE key = 'origin'")
    with open_archive(run) as reader, pytest.raises(FolderError, match="makes no sense"):
        _ = reader.meta


def test_a_reader_writes_nothing(run: Path) -> None:
    before = archive(run).read_bytes()
    with open_archive(run) as reader:
        reader.digest()
        with pytest.raises(apsw.ReadOnlyError):
            reader._connection.execute("DELETE FROM reading")
    assert archive(run).read_bytes() == before
    assert [file.name for file in run.iterdir()] == ["archive.sqlite"]


# A disk that cannot be written


def test_read_only_media_are_read(run: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("benchrun.archive.media.writable", lambda _folder: False)
    with open_archive(run) as reader:
        assert (reader.count, reader.check()) == (40, [])
        assert "immutable" in reader._connection.filename or reader._connection.open_flags & apsw.SQLITE_OPEN_READONLY


@pytest.mark.parametrize("ending", ["-wal", "-journal"])
def test_read_only_media_with_an_unfinished_run_say_what_to_do(
    run: Path, ending: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("benchrun.archive.media.writable", lambda _folder: False)
    (run / f"archive.sqlite{ending}").write_bytes(b"newest readings")
    with pytest.raises(FolderError, match="Copy the whole folder to a disk that can be written"):
        open_archive(run)
