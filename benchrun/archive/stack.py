"""Readings of one name as arrays: the fast path from the archive to the mathematics."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from benchrun.archive.rows import FLOATS, WAVES, Layout, Row
from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.errors import DataSetError

Column = npt.NDArray[np.float64] | npt.NDArray[np.str_]


@dataclass(frozen=True, slots=True)
class Stack:
    """The final attempts of n readings of one name, in the schedule's order.

    `index` (n,), `frequencies_hz` (n, P) the probe's grid, `data` (n, T, W, P) raw waves in root-watt, `conditions` and
    `scalars` one column (n,) for each key (NaN or "" where a reading has none), `flags` n tuples, `started_ns` (n,)
    bench time.
    """

    name: str
    index: npt.NDArray[np.int64]
    frequencies_hz: FloatArray
    tones: tuple[str, ...]
    offsets_hz: tuple[float, ...]
    waves: tuple[str, ...]
    data: ComplexArray
    coherent: bool
    conditions: Mapping[str, Column]
    scalars: Mapping[str, Column]
    flags: tuple[tuple[str, ...], ...]
    started_ns: npt.NDArray[np.int64]


def stack(name: str, layouts: Sequence[Layout], rows: Sequence[Row]) -> Stack:
    """Return `rows` (with their layouts) as arrays. Raises DataSetError where there are none or their shapes differ."""
    if not rows:
        raise DataSetError(f"no reading called '{name}' was committed")
    if len(set(layouts)) > 1 or len({row.shape for row in rows}) > 1:
        raise DataSetError(f"readings '{name}' differ in tones, waves or points: give them different names")
    layout, shape = layouts[0], json.loads(rows[0].shape)
    n = len(rows)
    return Stack(
        name=name,
        index=np.array([row.schedule_index for row in rows], dtype=np.int64),
        frequencies_hz=np.frombuffer(b"".join(row.frequencies_hz for row in rows), FLOATS)
        .astype(np.float64)
        .reshape(n, -1),
        tones=tuple(json.loads(layout.tones)),
        offsets_hz=tuple(map(float, json.loads(layout.offsets_hz))),
        waves=tuple(json.loads(layout.waves)),
        data=np.frombuffer(b"".join(row.data for row in rows), WAVES).astype(np.complex128).reshape(n, *shape),
        coherent=bool(layout.coherent),
        conditions=_columns(_texts(row.conditions for row in rows)),
        scalars=_columns([{k: float(v) for k, v in one.items()} for one in _texts(row.scalars for row in rows)]),
        flags=tuple(tuple(words) for words in _texts(row.flags for row in rows)),
        started_ns=np.array([row.started_ns for row in rows], dtype=np.int64),
    )


def _texts(texts: Iterable[str]) -> list[Any]:
    """Return many JSON texts read at once, which is several times faster than one by one."""
    return list(json.loads(f"[{','.join(texts)}]"))


def _columns(maps: Sequence[Mapping[str, float | str]]) -> dict[str, Column]:
    return {key: _column([one.get(key) for one in maps]) for key in dict.fromkeys(key for one in maps for key in one)}


def _column(values: Sequence[float | str | None]) -> Column:
    """Return one column: text where any value is text, else float64 with NaN for what is absent."""
    if any(isinstance(value, str) for value in values):
        return np.array(["" if value is None else str(value) for value in values], dtype=np.str_)
    return np.array([np.nan if value is None else value for value in values], dtype=np.float64)
