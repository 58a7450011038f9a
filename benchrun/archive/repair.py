"""Recovering what can be read of a damaged archive into a new one; the old one is never touched.

A reading is recovered where its own checksum fits, so nothing that was changed can come in; rows of the other tables
must be what such rows are.
"""

from __future__ import annotations

import contextlib
import json
from collections.abc import Iterable, Iterator
from dataclasses import MISSING, dataclass, fields
from pathlib import Path
from typing import Any, NamedTuple

from benchrun.archive.damaged import Damaged, damaged_archive
from benchrun.archive.meta import Event, Meta
from benchrun.archive.rows import Layout, Row, checksum, decode
from benchrun.archive.write import ArchiveWriter
from benchrun.contract.reading import Reading
from benchrun.errors import FolderError

#: What a run says of itself is text but for these.
_KINDS: dict[str, type | tuple[type, ...]] = {
    "files": dict, "readings_planned": int, "seed": (int, type(None)), "device": dict, "versions": dict,
    "identities": dict, "cal_due": dict, "result": (dict, type(None)),
}  # fmt: skip
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
    with damaged_archive(path) as archive:
        return _Recovery(archive, path).into(folder)


class _Recovery:
    """One recovery."""

    def __init__(self, archive: Damaged, path: Path) -> None:
        self._archive, self._path = archive, path
        self._highest = 0
        self.lost: list[str] = []

    def into(self, folder: Path) -> Repaired:
        readings = self._readings()
        meta = self._meta(1 + max((index for index, _, _ in readings), default=-1))
        products = {row.number: row for row in self._archive.rows("product", _product)}
        events = {row.number: row for row in self._archive.rows("event", _event)}
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
        layouts = {row[0]: Layout(*row[1:]) for row in self._archive.rows("layout", _layout)}
        found: dict[tuple[int, str, int], Reading] = {}
        for number, reading in self._archive.rows("reading", lambda values: _reading(values, layouts)):
            found[reading.index, reading.name, reading.attempt] = reading
            self._highest = max(self._highest, number)
        return found

    def _meta(self, at_least: int) -> Meta:
        """Return what the run says of itself; files that are lost are those beside the archive.

        `at_least` so many readings were planned, where that is lost.
        """
        stored: dict[str, Any] = {}
        for field in fields(Meta):
            try:
                stored[field.name] = _of_kind(field.name, self._archive.word(field.name))
            except (ValueError, TypeError):
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

    def _count_gaps(self, kind: str, numbers: dict[int, Any]) -> None:
        missing = max(numbers, default=0) - len(numbers)
        if missing:
            self.lost.append(f"{missing} {kind}{'s' if missing > 1 else ''} before the last that is left")

    def _count_missing(
        self, readings: dict[tuple[int, str, int], Reading], planned: int, events: dict[int, EventRow]
    ) -> None:
        """Say which readings are not there of those that had been committed, as far as that is known."""
        there = [(index, index) for index, _, _ in readings]
        gaps, behind = gaps_between([*there, *_passed_over(events.values())])
        missing = sum(last - first + 1 for first, last in gaps)
        if missing:
            what = "1 reading, if it was" if missing == 1 else f"{missing} readings, if they were"
            self.lost.append(f"{what} taken: {', '.join(_span(gap) for gap in gaps)}")
        if self._highest - len(readings) > missing:
            self.lost.append(f"{self._highest - len(readings) - missing} attempts at readings that were tried again")
        if behind < planned:
            self.lost.append(f"readings from {behind} to {planned - 1}, as far as they had been committed")


def gaps_between(spans: Iterable[tuple[int, int]]) -> tuple[list[tuple[int, int]], int]:
    """Return the spans of numbers, from 0, that lie between some (first, last); and the first behind them all."""
    gaps, following = [], 0
    for first, last in sorted(spans):
        if first > following:
            gaps.append((following, first - 1))
        following = max(following, last + 1)
    return gaps, following


def _span(span: tuple[int, int]) -> str:
    first, last = span
    return str(first) if first == last else f"{first}-{last}"


def _passed_over(events: Iterable[EventRow]) -> Iterator[tuple[int, int]]:
    """Yield the first and the last of readings that were not taken because the operator said so."""
    for row in events:
        with contextlib.suppress(ValueError, TypeError, KeyError):
            if row.kind == "skipped":
                detail = json.loads(row.detail)
                yield int(detail["first"]), int(detail["last"])


def _of_kind(name: str, value: Any) -> Any:
    """Return what a run says of itself. Raises TypeError where that cannot be."""
    if not isinstance(value, _KINDS.get(name, str)):
        raise TypeError(f"{name} is {type(value).__name__}")
    return value


def _layout(values: tuple[Any, ...]) -> tuple[int, str, str, str, int]:
    number, tones, offsets_hz, waves, coherent = values
    if not all(isinstance(json.loads(text), list) for text in (tones, offsets_hz, waves)) or coherent not in (0, 1):
        raise ValueError("no layout")
    return int(number), tones, offsets_hz, waves, coherent


def _reading(values: tuple[Any, ...], layouts: dict[int, Layout]) -> tuple[int, Reading]:
    """Return a reading whose checksum fits, behind its row's number. Raises ValueError, KeyError, TypeError."""
    number, index, name, attempt, layout, *rest = values[:-1]
    row = Row(index, name, attempt, *rest)
    if checksum(layouts[layout], row) != values[-1]:
        raise ValueError("its checksum does not fit")
    return int(number), decode(layouts[layout], row)


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
