"""Writing an archive: one transaction for each reading, on the disk before commit() returns.

Rules kept here:
- a reading that commit() has returned for is in the file, whatever happens next;
- the same (index, name, attempt) is never written twice;
- one writer at a time; readers beside it at any time;
- when it is closed, the file alone is the whole archive.
"""

from __future__ import annotations

import contextlib
from collections.abc import Iterator, Mapping
from dataclasses import asdict, fields
from pathlib import Path
from typing import Any, Self

import apsw

from benchrun.archive import media, schema
from benchrun.archive.meta import Event, Meta, State, utc_now
from benchrun.archive.rows import Layout, checksum, encode, to_json
from benchrun.contract.reading import Reading
from benchrun.errors import DiskError, FolderError

#: How long to wait for a reader that stands in the way of closing, in ms.
PATIENCE_MS = 2000
_INSERT = f"INSERT INTO reading ({schema.READING_COLUMNS}) VALUES ({','.join('?' * 14)})"
_META = "INSERT OR REPLACE INTO meta (key, value) VALUES (?, ?)"


class ArchiveWriter:
    """The one writer of a run's archive. Make it with create() or, for an archive that exists, append()."""

    def __init__(self, path: Path, lock: media.WriterLock, connection: apsw.Connection) -> None:
        self.path = path
        self._lock = lock
        self._connection = connection
        self._execute = connection.execute
        self._layouts: dict[Layout, int] = {}
        self._readings = 0
        self._open = True

    @classmethod
    def create(cls, folder: Path, meta: Meta, *, vfs: str | None = None) -> ArchiveWriter:
        """Make folder/archive.sqlite and the folder where it is absent.

        Raises FolderError where there is an archive already, where another writer is at work, or on a network file
        system, and DiskError where it cannot be written. `vfs` names an apsw VFS.
        """
        path = folder / schema.FILE_NAME
        try:
            folder.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            raise FolderError(
                f"{folder}: cannot be made ({error.strerror or error}). Choose another folder with --to"
            ) from error
        media.refuse_network(folder)
        with contextlib.ExitStack() as undo:
            lock = media.WriterLock(folder)
            undo.callback(lock.release)
            _require_absent(path)
            undo.callback(_remove, path)
            writer = cls._opened(path, lock, vfs, make=True)
            undo.callback(writer._connection.close, force=True)
            writer._begin(meta)
            undo.pop_all()
        return writer

    @classmethod
    def append(cls, folder: Path) -> Self:
        """Open the archive of a run that has ended, to add to it. Raises FolderError, DiskError."""
        from benchrun.archive.read import open_archive

        open_archive(folder).close()
        media.refuse_network(folder)
        with contextlib.ExitStack() as undo:
            lock = media.WriterLock(folder)
            undo.callback(lock.release)
            writer = cls._opened(folder / schema.FILE_NAME, lock, None, make=False)
            undo.pop_all()
        return writer

    @classmethod
    def _opened(cls, path: Path, lock: media.WriterLock, vfs: str | None, *, make: bool) -> Self:
        flags = apsw.SQLITE_OPEN_READWRITE | (apsw.SQLITE_OPEN_CREATE if make else 0)
        with _on_disk(path, "opened", 0):
            connection = apsw.Connection(str(path), flags=flags, vfs=vfs)
        writer = cls(path, lock, connection)
        try:
            with _on_disk(path, "opened", 0):
                _configure(connection)
                writer._readings = 0 if make else int(connection.execute("SELECT count(*) FROM reading").get)
        except BaseException:
            connection.close(force=True)
            raise
        return writer

    def _begin(self, meta: Meta) -> None:
        stored = asdict(meta)
        stored["started_utc"] = meta.started_utc or utc_now()
        with self._transaction("begun"):
            self._execute(schema.TABLES)
            self._connection.executemany(_META, [(key, to_json(value)) for key, value in stored.items()])

    @property
    def readings(self) -> int:
        """How many readings are committed."""
        return self._readings

    def commit(self, reading: Reading) -> None:
        """Write one reading, in one transaction; when this returns, it is on the disk.

        Raises DiskError where it cannot be written; ValueError where it contradicts itself, and RuntimeError where this
        (index, name, attempt) is there already: both are defects of ours.
        """
        layout, row = encode(reading)
        with self._transaction(f"reading {reading.index} '{reading.name}'"):
            number = self._layouts.get(layout) or self._layout_number(layout)
            self._execute(_INSERT, (*row[:3], number, *row[3:], checksum(layout, row)))
        self._layouts[layout] = number
        self._readings += 1

    def log(self, event: Event) -> int:
        """Write down that something happened; returns the event's number. Raises DiskError."""
        with self._transaction(f"event '{event.kind}'"):
            self._execute(
                "INSERT INTO event (kind, text, detail, at_ns, at_utc) VALUES (?, ?, ?, ?, ?)",
                (event.kind, event.text, to_json(dict(event.detail)), event.at_ns, event.at_utc or utc_now()),
            )
            return self._connection.last_insert_rowid()

    def product(self, kind: str, name: str, document: Mapping[str, Any], made_utc: str = "") -> int:
        """Keep what was made of readings, now if nothing else is said; returns its number here. Raises DiskError."""
        with self._transaction(f"{kind} '{name}'"):
            self._execute(
                "INSERT INTO product (kind, name, document, made_utc) VALUES (?, ?, ?, ?)",
                (kind, name, to_json(dict(document)), made_utc or utc_now()),
            )
            return self._connection.last_insert_rowid()

    def update(self, **changes: Any) -> None:
        """Change what meta says (identities=..., result=...). Raises DiskError, and ValueError for an unknown word."""
        unknown = changes.keys() - {field.name for field in fields(Meta)}
        if unknown:
            raise ValueError(f"an archive's meta has no {', '.join(sorted(unknown))}")
        with self._transaction("what the run says of itself"):
            self._connection.executemany(_META, [(key, to_json(value)) for key, value in changes.items()])

    def close(self, state: State | None = None) -> None:
        """Write down how the run ended and close; the file alone is then the archive. Twice does no harm.

        Raises DiskError where the end cannot be written; what was committed is safe even then.
        """
        if not self._open:
            return
        self._open = False
        try:
            if state is not None:
                self.update(state=state, ended_utc=utc_now())
            with _on_disk(self.path, "closed", self._readings):
                self._leave_wal()
        finally:
            with contextlib.suppress(apsw.Error):
                self._connection.close(force=True)
            self._lock.release()

    def __enter__(self) -> ArchiveWriter:
        return self

    def __exit__(self, *_exception: object) -> None:
        self.close()

    def _leave_wal(self) -> None:
        """Move everything into the one file. A reader in the way can only delay this: nothing is lost by it."""
        with contextlib.suppress(apsw.BusyError, apsw.LockedError):
            self._connection.wal_checkpoint(mode=apsw.SQLITE_CHECKPOINT_TRUNCATE)
            self._execute("PRAGMA journal_mode = DELETE").fetchall()

    def _layout_number(self, layout: Layout) -> int:
        self._execute("INSERT OR IGNORE INTO layout (tones, offsets_hz, waves, coherent) VALUES (?, ?, ?, ?)", layout)
        found = self._execute(
            "SELECT id FROM layout WHERE tones = ? AND offsets_hz = ? AND waves = ? AND coherent = ?", layout
        ).get
        return int(found)

    @contextlib.contextmanager
    def _transaction(self, what: str) -> Iterator[None]:
        """Do the block's statements in one transaction: all of them or none."""
        with _on_disk(self.path, what, self._readings):
            self._execute("BEGIN IMMEDIATE")
            try:
                yield
                self._execute("COMMIT")
            except BaseException:
                self._roll_back()
                raise

    def _roll_back(self) -> None:
        """Undo what SQLite has not undone by itself already (it does after some errors of the disk)."""
        if self._connection.in_transaction:
            with contextlib.suppress(apsw.Error):
                self._execute("ROLLBACK")


def _require_absent(path: Path) -> None:
    if path.exists():
        raise FolderError(
            f"{path}: there is an archive already, and none is overwritten. Choose another folder with --to"
        )


def _remove(path: Path) -> None:
    """Remove an archive that could not be begun, so that the folder can be used once there is room."""
    for ending in ("", "-wal", "-shm", "-journal"):
        with contextlib.suppress(OSError):
            path.with_name(f"{path.name}{ending}").unlink()


def _configure(connection: apsw.Connection) -> None:
    """Everything on the disk before a commit returns; readers beside the writer; keys checked."""
    connection.set_busy_timeout(PATIENCE_MS)
    for pragma in (
        "journal_mode = WAL",
        "synchronous = FULL",
        "fullfsync = ON",
        "foreign_keys = ON",
        "trusted_schema = OFF",
    ):
        connection.execute(f"PRAGMA {pragma}").fetchall()


@contextlib.contextmanager
def _on_disk(path: Path, what: str, safe: int) -> Iterator[None]:
    """Turn SQLite's errors into a DiskError that says what is safe; a second commit of one key is our own defect."""
    try:
        yield
    except apsw.ConstraintError as error:
        raise RuntimeError(f"{path}: {what} was committed before, or breaks a rule of the archive ({error})") from error
    except apsw.Error as error:
        raise DiskError(
            f"{path}: could not be written ({what}): {_reason(error)}. {safe} readings are safe in it. "
            "Make room or mend the disk"
        ) from error


def _reason(error: apsw.Error) -> str:
    match error:
        case apsw.FullError():
            return "the disk is full"
        case apsw.ReadOnlyError():
            return "it may not be written to"
        case apsw.BusyError() | apsw.LockedError():
            return "another program holds it locked"
        case apsw.CantOpenError():
            return "it cannot be opened"
        case apsw.IOError():
            return f"the disk failed ({error})"
        case _:
            return str(error)
