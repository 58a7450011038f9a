"""The tables of an archive, in SQLite's own words, and how to know an archive from any other file."""

from __future__ import annotations

#: File name of the archive in its run folder.
FILE_NAME = "archive.sqlite"
#: "bnch" in ASCII: PRAGMA application_id of every archive.
APPLICATION_ID = 0x626E6368
#: PRAGMA user_version. A reader refuses a later one; an earlier one it must still read.
VERSION = 1

#: One row of `reading` for each (index, name, attempt). Texts are JSON; arrays of numbers are little-endian:
#: frequencies float64, waves complex128 (tones, waves, points) in C order. The checksum is rows.checksum().
TABLES = f"""
PRAGMA application_id = {APPLICATION_ID};
PRAGMA user_version = {VERSION};

CREATE TABLE meta (
    key    TEXT NOT NULL PRIMARY KEY,
    value  TEXT NOT NULL CHECK (json_valid(value))
) STRICT, WITHOUT ROWID;

CREATE TABLE layout (
    id          INTEGER PRIMARY KEY,
    tones       TEXT NOT NULL CHECK (json_valid(tones)),
    offsets_hz  TEXT NOT NULL CHECK (json_valid(offsets_hz)),
    waves       TEXT NOT NULL CHECK (json_valid(waves)),
    coherent    INTEGER NOT NULL CHECK (coherent IN (0, 1)),
    UNIQUE (tones, offsets_hz, waves, coherent)
) STRICT;

CREATE TABLE reading (
    schedule_index  INTEGER NOT NULL CHECK (schedule_index >= 0),
    name            TEXT NOT NULL,
    attempt         INTEGER NOT NULL CHECK (attempt >= 0),
    layout          INTEGER NOT NULL REFERENCES layout (id),
    conditions      TEXT NOT NULL CHECK (json_valid(conditions)),
    scalars         TEXT NOT NULL CHECK (json_valid(scalars)),
    flags           TEXT NOT NULL CHECK (json_valid(flags)),
    shape           TEXT NOT NULL CHECK (json_valid(shape)),
    frequencies_hz  BLOB NOT NULL,
    data            BLOB NOT NULL,
    started_ns      INTEGER NOT NULL,
    ended_ns        INTEGER NOT NULL,
    started_utc     TEXT NOT NULL,
    checksum        BLOB NOT NULL CHECK (length(checksum) = 32),
    PRIMARY KEY (schedule_index, name, attempt)
) STRICT;

CREATE TABLE product (
    number    INTEGER PRIMARY KEY,
    kind      TEXT NOT NULL,
    name      TEXT NOT NULL,
    document  TEXT NOT NULL CHECK (json_valid(document)),
    made_utc  TEXT NOT NULL
) STRICT;

CREATE TABLE event (
    id      INTEGER PRIMARY KEY,
    kind    TEXT NOT NULL,
    text    TEXT NOT NULL,
    detail  TEXT NOT NULL CHECK (json_valid(detail)),
    at_ns   INTEGER NOT NULL,
    at_utc  TEXT NOT NULL
) STRICT;
"""

READING_COLUMNS = (
    "schedule_index, name, attempt, layout, conditions, scalars, flags, shape, frequencies_hz, data, "
    "started_ns, ended_ns, started_utc, checksum"
)
#: Readings with their layouts, columns as in rows.Layout and rows.Row, and the checksum last.
ROWS = (
    "SELECT tones, offsets_hz, waves, coherent, schedule_index, name, attempt, conditions, scalars, flags, shape,"
    " frequencies_hz, data, started_ns, ended_ns, started_utc, checksum"
    " FROM reading JOIN layout ON layout.id = reading.layout"
)
#: Readings that no later attempt replaces.
FINAL = (
    "NOT EXISTS (SELECT 1 FROM reading AS later WHERE later.schedule_index = reading.schedule_index"
    " AND later.name = reading.name AND later.attempt > reading.attempt)"
)
