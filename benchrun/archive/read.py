"""Reading an archive: while it is written, after it was closed, from read-only media, or after a crash."""

from __future__ import annotations

import contextlib
import hashlib
import json
from collections.abc import Iterator
from dataclasses import fields
from pathlib import Path
from typing import Any

import apsw

from benchrun.archive import media, schema
from benchrun.archive.check import check
from benchrun.archive.meta import Event, Meta, Product
from benchrun.archive.rows import Layout, Row, canonical, decode
from benchrun.archive.stack import Stack, stack
from benchrun.contract.reading import Reading
from benchrun.errors import DiskError, FolderError

PATIENCE_MS = 5000
_IN_ORDER = "ORDER BY schedule_index, name, attempt"
_DAMAGED = "Look for a copy of the run folder, and keep this one as it is"


class ArchiveReader:
    """An open archive. It sees whole transactions only, also beside a writer. Use it as a context, or close()."""

    def __init__(self, path: Path, connection: apsw.Connection) -> None:
        self.path = path
        self._connection = connection

    @property
    def meta(self) -> Meta:
        """Where the run came from and how it stands. Raises FolderError where that is damaged."""
        with _readable(self.path):
            stored = {key: json.loads(value) for key, value in self._connection.execute("SELECT key, value FROM meta")}
            known = {field.name for field in fields(Meta)}
            return Meta(**{key: value for key, value in stored.items() if key in known})

    @property
    def count(self) -> int:
        """How many readings are final (each index and name once)."""
        return self._number("SELECT count(*) FROM (SELECT DISTINCT schedule_index, name FROM reading)")

    @property
    def count_all(self) -> int:
        """How many readings there are, every attempt counted."""
        return self._number("SELECT count(*) FROM reading")

    @property
    def last_index(self) -> int:
        """Greatest index of a reading that is committed, -1 where there is none."""
        return self._number("SELECT ifnull(max(schedule_index), -1) FROM reading")

    @property
    def names(self) -> tuple[str, ...]:
        """Names of readings, in the order in which the schedule first meets them."""
        with _readable(self.path):
            query = "SELECT name FROM reading GROUP BY name ORDER BY min(schedule_index)"
            return tuple(name for (name,) in self._connection.execute(query))

    def readings(self, name: str | None = None, *, every_attempt: bool = False) -> Iterator[Reading]:
        """Yield readings in the schedule's order, final attempts unless all are wanted. Raises FolderError."""
        for layout, row in self._rows(name, every_attempt=every_attempt):
            with _readable(self.path):
                reading = decode(layout, row)
            yield reading

    def attempts(self, index: int) -> list[Reading]:
        """Return every attempt at one reading, the final one last; [] where it is not there. Raises FolderError."""
        with _readable(self.path):
            query = f"{schema.ROWS} WHERE schedule_index = ? ORDER BY name, attempt"
            rows = self._connection.execute(query, (index,))
            return [decode(Layout(*values[:4]), Row(*values[4:-1])) for values in rows]

    def stack(self, name: str) -> Stack:
        """Return the final readings `name` as arrays. Raises DataSetError where there are none or shapes differ."""
        rows = list(self._rows(name))
        with _readable(self.path):
            return stack(name, [layout for layout, _ in rows], [row for _, row in rows])

    def products(self, kind: str | None = None, name: str | None = None) -> list[Product]:
        """Return what was made of this run's readings, oldest first."""
        wanted = "ifnull(kind = ?, 1) AND ifnull(name = ?, 1)"
        query = f"SELECT number, kind, name, document, made_utc FROM product WHERE {wanted} ORDER BY number"
        with _readable(self.path):
            return [
                Product(int(number), str(kind), str(name), json.loads(document), str(made))
                for number, kind, name, document, made in self._connection.execute(query, (kind, name))
            ]

    def log(self, kind: str | None = None) -> list[Event]:
        """Return what happened, in order."""
        query = "SELECT kind, text, detail, at_ns, at_utc FROM event WHERE ifnull(kind = ?, 1) ORDER BY id"
        with _readable(self.path):
            return [
                Event(str(kind), str(text), json.loads(detail), int(at_ns), str(at_utc))
                for kind, text, detail, at_ns, at_utc in self._connection.execute(query, (kind,))
            ]

    def digest(self) -> str:
        """Return the SHA-256 (hex) over conditions, flags, scalars, waves and bench times of the final readings.

        UTC, attempt numbers and the order of keys are left out: two runs with the same digest measured the same.
        """
        sha = hashlib.sha256()
        for layout, row in self._rows():
            part = canonical(layout, row)
            sha.update(b"%d:" % len(part))
            sha.update(part)
        return sha.hexdigest()

    def copy_to(self, path: Path) -> None:
        """Write this archive as it stands to a new file that is whole by itself. Raises FolderError, DiskError."""
        with contextlib.closing(_new(path)) as copy, _readable(self.path):
            with copy.backup("main", self._connection, "main") as backup:
                backup.step()
            copy.execute("PRAGMA journal_mode = DELETE").fetchall()

    def check(self) -> list[str]:
        """Return everything that is wrong with this archive, in words; [] for a sound one."""
        return check(self._connection)

    def close(self) -> None:
        """Close; twice does no harm."""
        self._connection.close(force=True)

    def __enter__(self) -> ArchiveReader:
        return self

    def __exit__(self, *_exception: object) -> None:
        self.close()

    def _rows(self, name: str | None = None, *, every_attempt: bool = False) -> Iterator[tuple[Layout, Row]]:
        final = "" if every_attempt else f"AND {schema.FINAL}"
        query = f"{schema.ROWS} WHERE ifnull(reading.name = ?, 1) {final} {_IN_ORDER}"
        with _readable(self.path):
            for values in self._connection.execute(query, (name,)):
                yield Layout(*values[:4]), Row(*values[4:-1])

    def _number(self, query: str) -> int:
        with _readable(self.path):
            return int(self._connection.execute(query).get)


def open_archive(path: Path) -> ArchiveReader:
    """Open the archive of a run: its folder, or the file. No reading is touched.

    Raises FolderError where there is none, where the file is damaged or foreign, or where a later benchrun wrote it.
    """
    file = path / schema.FILE_NAME if path.is_dir() else path
    if not file.is_file():
        raise FolderError(
            f"{path}: there is no run here. A run folder holds {schema.FILE_NAME}; `benchrun run` names it last"
        )
    connection = _connect(file)
    try:
        with _readable(file):
            connection.set_busy_timeout(PATIENCE_MS)
            _require_ours(file, connection)
    except BaseException:
        connection.close(force=True)
        raise
    return ArchiveReader(file, connection)


def _new(path: Path) -> apsw.Connection:
    try:
        return apsw.Connection(str(path), flags=apsw.SQLITE_OPEN_READWRITE | apsw.SQLITE_OPEN_CREATE)
    except apsw.Error as error:
        raise DiskError(f"{path}: cannot be made ({error}). Make room") from error


def _connect(file: Path) -> apsw.Connection:
    """Open read-only; on a disk that cannot be written, without the files beside it that SQLite would want to make."""
    flags = apsw.SQLITE_OPEN_READONLY | apsw.SQLITE_OPEN_URI
    frozen = not media.writable(file.parent)
    if frozen and (_beside(file, "-wal") or _beside(file, "-journal")):
        raise FolderError(
            f"{file}: its run did not end in order, and its newest readings are in a file beside it. "
            "Copy the whole folder to a disk that can be written, and open it there"
        )
    if _beside(file, "-journal"):
        _roll_back(file)
    with _readable(file):
        return apsw.Connection(f"{file.resolve().as_uri()}{'?immutable=1' if frozen else ''}", flags=flags)


def _beside(file: Path, ending: str) -> bool:
    """Whether SQLite left something in a file beside this one."""
    other = file.with_name(f"{file.name}{ending}")
    return other.exists() and other.stat().st_size > 0


def _roll_back(file: Path) -> None:
    """Let SQLite undo a closing that broke off in the middle, which a reader may not. No reading is touched."""
    with _readable(file):
        connection = apsw.Connection(str(file), flags=apsw.SQLITE_OPEN_READWRITE)
        connection.set_busy_timeout(PATIENCE_MS)
        try:
            _pragma(connection, "user_version")
        finally:
            connection.close(force=True)


def _require_ours(file: Path, connection: apsw.Connection) -> None:
    application, version = (_pragma(connection, word) for word in ("application_id", "user_version"))
    if application != schema.APPLICATION_ID:
        raise FolderError(f"{file}: is a database, but not an archive of benchrun. Name a run folder")
    if version > schema.VERSION:
        raise FolderError(
            f"{file}: was written by a later benchrun (archive version {version}; this one reads up to "
            f"{schema.VERSION}). Update benchrun"
        )


def _pragma(connection: apsw.Connection, word: str) -> int:
    value: Any = connection.execute(f"PRAGMA {word}").get
    return int(value)


@contextlib.contextmanager
def _readable(file: Path) -> Iterator[None]:
    """Turn what a damaged or foreign file raises into a FolderError that helps."""
    try:
        yield
    except apsw.NotADBError as error:
        raise FolderError(
            f"{file}: is no archive, or its beginning is damaged. Name a run folder; {_DAMAGED}"
        ) from error
    except apsw.BusyError as error:
        raise FolderError(f"{file}: is locked by another program. Try again when that has ended") from error
    except apsw.Error as error:
        raise FolderError(f"{file}: cannot be read ({error}). {_DAMAGED}") from error
    except (ValueError, TypeError) as error:
        raise FolderError(f"{file}: holds something that makes no sense ({error}). {_DAMAGED}") from error
