"""What derive hands to save: tables, one-port data, documents, and what must be said beside them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray

Column = npt.NDArray[np.float64] | npt.NDArray[np.str_]


@dataclass(frozen=True, slots=True)
class Provenance:
    """Where results come from: written into every document and file.

    `origin` is "real" or "simulated, seed N"; hashes are of the readings and of the schedule; `identities` say who
    answered (instrument name to *IDN? text).
    """

    origin: str
    version: str = ""
    title: str = ""
    part: str = ""
    serial: str = ""
    readings_hash: str = ""
    schedule_hash: str = ""
    identities: Mapping[str, str] = field(default_factory=dict)

    @property
    def simulated(self) -> bool:
        """Whether nothing real was measured."""
        return self.origin != "real"


@dataclass(frozen=True, slots=True)
class Table:
    """Named columns of one length, the unit at the end of each name; NaN is an unknown number, written as nothing."""

    name: str
    columns: Mapping[str, Column]

    def __len__(self) -> int:
        return len(next(iter(self.columns.values()), ()))


@dataclass(frozen=True, slots=True)
class OnePortData:
    """One reflection-like quantity on a rising grid (F,): `quantity` is S22 or T22, and stands in a file's S11 column.

    `conditions` are what tells this one from others of the run: {"drive_dbm": 14.0}, empty for a cold one-port.
    `comments` are whole lines for the head of the file.
    """

    quantity: str
    serial: str
    conditions: Mapping[str, float | str]
    frequency_hz: FloatArray
    values: ComplexArray
    comments: tuple[str, ...]
    reference_ohm: float = 50.0


@dataclass(frozen=True, slots=True)
class Results:
    """Everything that was derived from one run's readings.

    `documents` maps (kind, name) to a JSON-ready document: ("calibration", "output-plane"), ("levelling", "drive").
    `notes` are sentences for the reader; `flags` says how many points carry each word.
    """

    tables: tuple[Table, ...] = ()
    networks: tuple[OnePortData, ...] = ()
    documents: Mapping[tuple[str, str], Mapping[str, Any]] = field(default_factory=dict)
    notes: tuple[str, ...] = ()
    flags: Mapping[str, int] = field(default_factory=dict)

    def __add__(self, other: Results) -> Results:
        """Return both together."""
        flags = dict(self.flags)
        for word, count in other.flags.items():
            flags[word] = flags.get(word, 0) + count
        return Results(
            self.tables + other.tables,
            self.networks + other.networks,
            {**self.documents, **other.documents},
            tuple(dict.fromkeys(self.notes + other.notes)),
            flags,
        )
