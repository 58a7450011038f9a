"""Recovering what can be read of a damaged archive into a new one; the old one is never touched.

Everything happens on a copy. SQLite itself replays what was not yet moved into the file, and decodes every row; where
its tree of pages is broken, each page that is a leaf is taken for a whole table in turn. A reading is recovered where
its own checksum fits, so nothing that was changed can come in; rows of the other tables must be what such rows are.
"""

from __future__ import annotations

import contextlib
import json
import shutil
import tempfile
from collections.abc import Callable, Iterator
from dataclasses import MISSING, dataclass, fields
from pathlib import Path
from typing import Any, NamedTuple

import apsw

from benchrun.archive import schema
from benchrun.archive.meta import Event, Meta
from benchrun.archive.rows import Layout, Row, checksum, decode
from benchrun.archive.write import ArchiveWriter
from benchrun.contract.reading import Reading
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
    "reading": schema.READING_COLUMNS,
    "product": "number, kind, name, document, made_utc",
    "event": "id, kind, text, detail, at_ns, at_utc",
}
_ROWID = "rowid"
#: Stands for what the run said of itself and nobody knows any more.
UNKNOWN = "unknown"


class ProductRow(NamedTuple):
    """A row of table product."""

    number: int
    kind: str
    name: str
    document: str
    made_utc: str


class EventRow(NamedTuple):
    """A row of table event."""

    number: int
    kind: str
    text: str
    detail: str
    at_ns: int
    at_utc: str


@dataclass(frozen=True, slots=True)
class Repaired:
    """What was recovered into `folder`, and what was lost, in words; [] where nothing was."""

    folder: Path
    readings: int
    planned: int
    lost: tuple[str, ...]


def repair(path: Path, folder: Path) -> Repaired:
    """Recover every readable reading of the archive file `path` into a new archive in `folder`, which it makes.

    Raises FolderError where the file is no archive of ours or nothing of it can be recovered, and where there
    is an archive in `folder`; DiskError where the new one cannot be written.
    """
    with tempfile.TemporaryDirectory(prefix="benchrun-repair-") as place:
        copy = _copied(path, Path(place))
        with contextlib.closing(_opened(copy, path)) as connection:
            return _Recovery(connection, copy, path).into(folder)


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


class _Recovery:
    """One recovery, from a copy that may be changed."""

    def __init__(self, connection: apsw.Connection, copy: Path, path: Path) -> None:
        self._connection, self._path = connection, path
        self._roots = {
            str(name): int(root)
            for name, root in connection.execute("SELECT name, rootpage FROM sqlite_schema WHERE type = 'table'")
        }
        with contextlib.suppress(apsw.Error):
            connection.wal_checkpoint(mode=apsw.SQLITE_CHECKPOINT_TRUNCATE)
        self._leaves = list(_leaves(copy))
        self.lost: list[str] = []

    def into(self, folder: Path) -> Repaired:
        readings = self._readings()
        meta = self._meta(1 + max((index for index, _, _ in readings), default=-1))
        products = {row.number: row for row in self._rows("product", _product)}
        events = {row.number: row for row in self._rows("event", _event)}
        if not readings and not events:
            raise FolderError(f"{self._path}: no reading of it can be recovered. Look for a copy of the run folder")
        self._count_gaps("product", products)
        self._count_gaps("event", events)
        self._count_missing(readings, meta.readings_planned, events)
        with ArchiveWriter.create(folder, meta) as writer:
            for key in sorted(readings):
                writer.commit(readings[key])
            for _, made in sorted(products.items()):
                writer.product(made.kind, made.name, json.loads(made.document), made.made_utc)
            for _, row in sorted(events.items()):
                writer.log(Event(row.kind, row.text, json.loads(row.detail), row.at_ns, row.at_utc))
            text = f"recovered from {self._path.name}: {len(readings)} readings"
            writer.log(Event("repair", text, {"lost": self.lost}))
        return Repaired(folder, len(readings), meta.readings_planned, tuple(self.lost))

    def _readings(self) -> dict[tuple[int, str, int], Reading]:
        layouts = {row[0]: Layout(*row[1:]) for row in self._rows("layout", _layout)}
        found: dict[tuple[int, str, int], Reading] = {}
        for reading in self._rows("reading", lambda values: _reading(values, layouts)):
            found[reading.index, reading.name, reading.attempt] = reading
        return found

    def _meta(self, at_least: int) -> Meta:
        """Return what the run says of itself; files that are lost are those beside the archive.

        `at_least` so many readings were planned, where that is lost.
        """
        stored: dict[str, Any] = {}
        for field in fields(Meta):
            try:
                text = self._connection.execute("SELECT value FROM meta WHERE key = ?", (field.name,)).get
                stored[field.name] = json.loads(text)
            except (*DAMAGED, ValueError, TypeError):
                needed = field.default is MISSING and field.default_factory is MISSING
                self._lose_meta(field.name, needed, stored, at_least)
        return Meta(**stored)

    def _lose_meta(self, name: str, needed: bool, stored: dict[str, Any], at_least: int) -> None:
        self.lost.append(f"what the run says of its {name.replace('_', ' ')}")
        beside = {path.name: path.read_text("utf-8") for path in sorted(self._path.parent.glob("*.yaml"))}
        guessed: dict[str, Any] = {
            "readings_planned": at_least,
            "files": beside,
            "recipe": next((one for one in beside if one.endswith(".recipe.yaml")), ""),
            "bench": next((one for one in beside if one.endswith(".bench.yaml")), ""),
        }
        if needed:
            stored[name] = guessed.get(name, UNKNOWN)
        elif name == "state":
            stored[name] = "failed"

    def _rows(self, table: str, understood: Callable[[tuple[Any, ...]], Any]) -> Iterator[Any]:
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

    def _count_gaps(self, kind: str, numbers: dict[int, Any]) -> None:
        missing = max(numbers, default=0) - len(numbers)
        if missing:
            self.lost.append(f"{missing} {kind}{'s' if missing > 1 else ''} before the last that is left")

    def _count_missing(
        self, readings: dict[tuple[int, str, int], Reading], planned: int, events: dict[int, EventRow]
    ) -> None:
        """Say which readings are not there of those that had been committed, as far as that is known."""
        there = {index for index, _, _ in readings}
        skipped: set[int] = set()
        for row in events.values():
            if row.kind == "skipped":
                detail = json.loads(row.detail)
                skipped |= set(range(int(detail["first"]), int(detail["last"]) + 1))
        missing = sorted(set(range(max(there, default=-1) + 1)) - there - skipped)
        if missing:
            what = "1 reading, if it was" if len(missing) == 1 else f"{len(missing)} readings, if they were"
            self.lost.append(f"{what} taken: {spans(missing)}")
        if max(there, default=-1) + 1 < planned:
            self.lost.append(
                f"readings from {max(there, default=-1) + 1} to {planned - 1}, as far as they had been committed"
            )


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


def _layout(values: tuple[Any, ...]) -> tuple[int, str, str, str, int]:
    number, tones, offsets_hz, waves, coherent = values
    if not all(isinstance(json.loads(text), list) for text in (tones, offsets_hz, waves)) or coherent not in (0, 1):
        raise ValueError("no layout")
    return int(number), tones, offsets_hz, waves, coherent


def _reading(values: tuple[Any, ...], layouts: dict[int, Layout]) -> Reading:
    """Return a reading whose checksum fits. Raises ValueError, KeyError, TypeError."""
    index, name, attempt, layout, *rest = values[:-1]
    row = Row(index, name, attempt, *rest)
    if checksum(layouts[layout], row) != values[-1]:
        raise ValueError("its checksum does not fit")
    return decode(layouts[layout], row)


def _product(values: tuple[Any, ...]) -> ProductRow:
    row = ProductRow(*values)
    _require(row, (int, str, str, str, str), row.document)
    return row


def _event(values: tuple[Any, ...]) -> EventRow:
    row = EventRow(*values)
    _require(row, (int, str, str, str, int, str), row.detail)
    return row


def _require(row: tuple[Any, ...], wanted: tuple[type, ...], document: str) -> None:
    """Raise ValueError, TypeError for a row that is none of its kind: it was on a page of another table."""
    if tuple(map(type, row)) != wanted:
        raise TypeError("a row of another table")
    if not isinstance(json.loads(document), dict):
        raise TypeError("no document")


def spans(numbers: list[int]) -> str:
    """Return sorted numbers as text: [1, 2, 3, 7] gives '1-3, 7'."""
    parts: list[list[int]] = []
    for number in numbers:
        if parts and number == parts[-1][-1] + 1:
            parts[-1] = [parts[-1][0], number]
        else:
            parts.append([number])
    return ", ".join("-".join(map(str, part)) for part in parts)
