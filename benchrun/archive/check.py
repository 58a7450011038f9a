"""Whether an archive is sound: SQLite's own checks, and ours row by row."""

from __future__ import annotations

import json
import math
from collections.abc import Iterator

import apsw

from benchrun.archive import schema
from benchrun.archive.rows import FLOATS, WAVES, Layout, Row, checksum


def check(connection: apsw.Connection) -> list[str]:
    """Return all problems found, in words; [] for a sound archive. Never raises for what is in the file."""
    problems: list[str] = []
    for part in (_file, _keys, _readings, _plan):
        try:
            problems.extend(part(connection))
        except (apsw.Error, ValueError, TypeError) as error:
            problems.append(f"cannot be read any further: {error}")
    return problems


def _file(connection: apsw.Connection) -> Iterator[str]:
    for (line,) in connection.execute("PRAGMA integrity_check"):
        if line != "ok":
            yield f"the file is damaged: {line}"


def _keys(connection: apsw.Connection) -> Iterator[str]:
    for table, row, parent, _ in connection.execute("PRAGMA foreign_key_check"):
        yield f"row {row} of {table} points to nothing in {parent}"


def _readings(connection: apsw.Connection) -> Iterator[str]:
    for values in connection.execute(schema.ROWS):
        layout, row = Layout(*values[:4]), Row(*values[4:-1])
        where = f"reading {row.schedule_index} '{row.name}' attempt {row.attempt}"
        if checksum(layout, row) != values[-1]:
            yield f"{where}: its checksum does not fit: it was changed after it was written"
        elif (fault := _shape_fault(layout, row)) is not None:
            yield f"{where}: {fault}"


def _shape_fault(layout: Layout, row: Row) -> str | None:
    shape = json.loads(row.shape)
    axes = [len(json.loads(layout.tones)), len(json.loads(layout.waves)), len(row.frequencies_hz) // FLOATS.itemsize]
    if shape != axes or len(row.data) != WAVES.itemsize * math.prod(shape):
        return f"shape {shape}, axes {axes} and {len(row.data)} bytes of waves do not fit together"
    return None


def _plan(connection: apsw.Connection) -> Iterator[str]:
    stored = dict(connection.execute("SELECT key, value FROM meta WHERE key IN ('readings_planned', 'state')"))
    planned, state = (json.loads(str(stored.get(key, "null"))) for key in ("readings_planned", "state"))
    if not isinstance(planned, int) or not isinstance(state, str):
        yield "it does not say how many readings were planned, or how the run ended"
        return
    beyond = connection.execute("SELECT count(*) FROM reading WHERE schedule_index >= ?", (planned,)).get
    if beyond:
        yield f"{beyond} readings are beyond the {planned} that were planned"
