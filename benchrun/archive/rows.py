"""A reading as a row of SQLite values, and back: exact, checked, and with a checksum of its own."""

from __future__ import annotations

import hashlib
import json
import math
from collections.abc import Mapping
from typing import Any, NamedTuple

import numpy as np

from benchrun.contract.reading import Reading

FLOATS = np.dtype("<f8")
WAVES = np.dtype("<c16")


class Layout(NamedTuple):
    """Axes that many readings share, as JSON texts: tones, offsets in Hz, waves; and whether tones were coherent."""

    tones: str
    offsets_hz: str
    waves: str
    coherent: int


class Row(NamedTuple):
    """One reading as it is stored: the columns of table `reading`, without its layout's number and its checksum."""

    schedule_index: int
    name: str
    attempt: int
    conditions: str
    scalars: str
    flags: str
    shape: str
    frequencies_hz: bytes
    data: bytes
    started_ns: int
    ended_ns: int
    started_utc: str


def encode(reading: Reading) -> tuple[Layout, Row]:
    """Return the row of a reading. Raises ValueError for one that contradicts itself or has an infinite condition."""
    data = np.ascontiguousarray(reading.data, dtype=WAVES)
    _require_shape(reading, data.shape)
    layout = Layout(
        to_json(reading.tones), to_json(_floats(reading.offsets_hz)), to_json(reading.waves), int(reading.coherent)
    )
    row = Row(
        reading.index,
        reading.name,
        reading.attempt,
        to_json(dict(reading.conditions)),
        to_json({key: _stored(value) for key, value in reading.scalars.items()}),
        to_json(reading.flags),
        to_json(data.shape),
        np.asarray(reading.frequencies_hz, dtype=FLOATS).tobytes(),
        data.tobytes(),
        reading.started_ns,
        reading.ended_ns,
        reading.started_utc,
    )
    return layout, row


def decode(layout: Layout, row: Row) -> Reading:
    """Return the reading of a row. Raises ValueError where it is damaged."""
    return Reading(
        index=row.schedule_index,
        name=row.name,
        attempt=row.attempt,
        conditions=json.loads(row.conditions),
        frequencies_hz=tuple(np.frombuffer(row.frequencies_hz, dtype=FLOATS).tolist()),
        tones=tuple(json.loads(layout.tones)),
        offsets_hz=tuple(map(float, json.loads(layout.offsets_hz))),
        waves=tuple(json.loads(layout.waves)),
        data=np.frombuffer(row.data, dtype=WAVES).astype(np.complex128).reshape(json.loads(row.shape)),
        coherent=bool(layout.coherent),
        scalars=scalars_of(row.scalars),
        flags=tuple(json.loads(row.flags)),
        started_ns=row.started_ns,
        ended_ns=row.ended_ns,
        started_utc=row.started_utc,
    )


def scalars_of(text: str) -> dict[str, float]:
    """Return scalars from their JSON text."""
    return {key: float(value) for key, value in json.loads(text).items()}


def checksum(layout: Layout, row: Row) -> bytes:
    """Return the SHA-256 over everything that a row holds, each part behind its length."""
    sha = hashlib.sha256()
    for part in (*layout, *row):
        stored = part if isinstance(part, bytes) else str(part).encode("utf-8", "surrogatepass")
        sha.update(b"%d:" % len(stored))
        sha.update(stored)
    return sha.digest()


def canonical(layout: Layout, row: Row) -> bytes:
    """Return what two runs must agree in to count as the same: all but the attempt's number and UTC, keys in order."""
    head = [
        row.schedule_index, row.name, _sorted(row.conditions), _sorted(row.scalars), row.flags, row.shape,
        row.started_ns, row.ended_ns, *layout,
    ]  # fmt: skip
    return to_json(head).encode() + b"\n" + row.frequencies_hz + row.data


def to_json(value: Any) -> str:
    """Return JSON text, floats to the last digit. Raises ValueError for a number that is not finite."""
    return json.dumps(value, allow_nan=False, separators=(",", ":"), default=_plain)


def _plain(value: Any) -> Any:
    """Return values that JSON does not know as something it does: NumPy's numbers and arrays, mappings."""
    if isinstance(value, np.generic | np.ndarray):
        return value.tolist()
    if isinstance(value, Mapping):
        return dict(value)
    raise TypeError(f"{type(value).__name__} cannot be kept in an archive")


def _sorted(text: str) -> str:
    return json.dumps(json.loads(text), sort_keys=True, separators=(",", ":"))


def _floats(values: tuple[float, ...]) -> list[float]:
    return [float(value) for value in values]


def _stored(value: float) -> float | str:
    """Return a scalar as JSON takes it: infinity (over range) and NaN as words that float() reads back."""
    value = float(value)
    return value if math.isfinite(value) else repr(value)


def _require_shape(reading: Reading, shape: tuple[int, ...]) -> None:
    wanted = (len(reading.tones), len(reading.waves), len(reading.frequencies_hz))
    if shape != wanted or len(reading.offsets_hz) != len(reading.tones):
        raise ValueError(f"reading {reading.index} {reading.name!r}: data of shape {shape} where its axes say {wanted}")
