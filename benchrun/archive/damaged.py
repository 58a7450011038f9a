"""A damaged archive, read on a copy: rows of every page that can be read, wherever the tree above them is broken.

SQLite itself replays what was not yet moved into the file, and decodes every row; each page that is a leaf is taken for
a whole table in turn. What comes out must be judged by whoever asks: a page may be a part of another table, or old.
"""

from __future__ import annotations

import contextlib
import json
import shutil
import tempfile
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import apsw

from benchrun.archive import schema
from benchrun.errors import DiskError, FolderError

#: Page size (bytes) where the file's beginning does not say; SQLite's own default. The header is 100 bytes long and
#: gives the page size at 16 (https://www.sqlite.org/fileformat2.html, 1.3); a page's first byte is its kind (1.6).
PAGE, HEADER, LEAF = 4096, 100, 0x0D
CHANGES, SIZE_VALID_AT = slice(24, 28), slice(92, 96)
#: What comes of a row, or of a whole page, that is damaged.
DAMAGED = (apsw.Error, UnicodeDecodeError)
#: More rows than fit on a page.
MOST_ON_PAGE = 1000
_COLUMNS = {
    "layout": "id, tones, offsets_hz, waves, coherent",
    "reading": f"rowid, {schema.READING_COLUMNS}",
    "product": "number, kind, name, document, made_utc",
    "event": "id, kind, text, detail, at_ns, at_utc",
}
_ROWID = "rowid"


@contextlib.contextmanager
def damaged_archive(path: Path) -> Iterator[Damaged]:
    """Read the archive file `path` on a copy. Raises FolderError for what is no archive, DiskError for lack of room."""
    with tempfile.TemporaryDirectory(prefix="benchrun-repair-") as place:
        copy = _copied(path, Path(place))
        with contextlib.closing(_opened(copy, path)) as connection:
            yield Damaged(connection, copy)


class Damaged:
    """A copy of an archive that may be damaged anywhere."""

    def __init__(self, connection: apsw.Connection, copy: Path) -> None:
        self._connection = connection
        self._roots = {
            str(name): int(root)
            for name, root in connection.execute("SELECT name, rootpage FROM sqlite_schema WHERE type = 'table'")
        }
        with contextlib.suppress(apsw.Error):
            connection.wal_checkpoint(mode=apsw.SQLITE_CHECKPOINT_TRUNCATE)
        self._leaves = list(_leaves(copy))

    def word(self, key: str) -> Any:
        """Return what the run says of itself under a key. Raises ValueError, TypeError where that cannot be read."""
        try:
            return json.loads(self._connection.execute("SELECT value FROM meta WHERE key = ?", (key,)).get)
        except apsw.Error as error:
            raise ValueError(str(error)) from error

    def rows(self, table: str, understood: Callable[[tuple[Any, ...]], Any]) -> Iterator[Any]:
        """Yield every row of a table that can be read and is one, from every page that may be a part of it."""
        for page in self._leaves:
            self._place(table, page)
            for values in self._on_page(table):
                with contextlib.suppress(ValueError, TypeError, KeyError):
                    yield understood(values)
        self._place(table, self._roots[table])

    def _place(self, table: str, page: int) -> None:
        """Let a page stand for the whole table."""
        self._connection.execute("UPDATE sqlite_schema SET rootpage = ? WHERE name = ?", (page, table)).fetchall()
        self._connection.execute("PRAGMA writable_schema = RESET").fetchall()
        self._connection.execute("PRAGMA writable_schema = ON").fetchall()

    def _on_page(self, table: str) -> Iterator[tuple[Any, ...]]:
        """Yield the rows of the page that stands for a table: from both ends, then what is left between one by one."""
        first, upward = self._run_of_rows(table, "ASC")
        yield from upward
        if first is None:
            return
        last, downward = self._run_of_rows(table, "DESC")
        yield from downward
        for number in range(first + 1, min(last or first, first + MOST_ON_PAGE)):
            with contextlib.suppress(*DAMAGED):
                yield from self._select(table, f"WHERE {_ROWID} = {number}")

    def _run_of_rows(self, table: str, order: str) -> tuple[int | None, list[tuple[Any, ...]]]:
        """Return the rows up to the first that cannot be read, and the number of the last one; None where all can."""
        rows: list[tuple[Any, ...]] = []
        number = 0 if order == "ASC" else 1 << 62
        try:
            for row_id, *values in self._connection.execute(
                f"SELECT {_ROWID}, {_COLUMNS[table]} FROM {table} NOT INDEXED ORDER BY {_ROWID} {order} "
                f"LIMIT {MOST_ON_PAGE}"
            ):
                number = int(str(row_id))
                rows.append(tuple(values))
        except DAMAGED:
            return number, rows
        return None, rows

    def _select(self, table: str, where: str) -> list[tuple[Any, ...]]:
        return self._connection.execute(f"SELECT {_COLUMNS[table]} FROM {table} NOT INDEXED {where}").fetchall()


def _copied(path: Path, place: Path) -> Path:
    """Copy an archive with what SQLite left beside it."""
    try:
        for ending in ("", "-wal", "-journal"):
            if not ending or _beside(path, ending):
                shutil.copyfile(path.with_name(path.name + ending), place / (path.name + ending))
    except OSError as error:
        raise DiskError(f"{path}: cannot be copied to be recovered ({error.strerror or error}). Make room") from error
    return place / path.name


def _beside(path: Path, ending: str) -> bool:
    return path.with_name(path.name + ending).is_file()


def _opened(copy: Path, path: Path) -> apsw.Connection:
    """Open the copy; where its first page is damaged, put that of a new archive in its place: all have the same one."""
    for renewed in (False, True):
        if renewed:
            _renew_first_page(copy)
        connection = apsw.Connection(str(copy), flags=apsw.SQLITE_OPEN_READWRITE)
        try:
            _require_tables(connection, path)
        except BaseException as error:
            connection.close(force=True)
            if not isinstance(error, DAMAGED):
                raise
        else:
            return connection
    raise FolderError(f"{path}: nothing of it can be read as an archive of benchrun. Look for a copy of the run folder")


def _require_tables(connection: apsw.Connection, path: Path) -> None:
    """Raise FolderError for a database that is not ours, apsw.Error where the tables' names cannot be read."""
    connection.execute("PRAGMA synchronous = OFF").fetchall()
    connection.execute("PRAGMA writable_schema = ON").fetchall()  # also lets SQLite read a file that was cut short
    names = {name for (name,) in connection.execute("SELECT name FROM sqlite_schema WHERE type = 'table'")}
    application = connection.execute("PRAGMA application_id").get
    if names and application not in (schema.APPLICATION_ID, 0) and "reading" not in names:
        raise FolderError(f"{path}: is a database, but not an archive of benchrun. Name a run folder")
    if not {*_COLUMNS, "meta"} <= names:
        raise apsw.CorruptError("tables are missing")


def _renew_first_page(copy: Path) -> None:
    with contextlib.closing(apsw.Connection("")) as new:
        new.execute(schema.TABLES)
        first = bytearray(new.serialize("main")[:PAGE])
    first[CHANGES], first[SIZE_VALID_AT] = b"\0\0\0\1", bytes(4)  # there are not as many pages as the new one has
    if _beside(copy, "-wal"):
        first[18:20] = bytes((2, 2))  # written and read with a write-ahead log
    with copy.open("r+b") as file:
        file.write(first)


def _leaves(copy: Path) -> Iterator[int]:
    """Yield the number of every page that looks like a leaf of a table; the first page is SQLite's own."""
    with copy.open("rb") as file:
        size = int.from_bytes(file.read(HEADER)[16:18], "big")
        size = 65536 if size == 1 else size
        size = size if 512 <= size <= 65536 and size & (size - 1) == 0 else PAGE
        number = 2
        file.seek(size)
        while page := file.read(size):
            if page[0] == LEAF:
                yield number
            number += 1
