"""What must be said beside the numbers: flags and their meaning, bounds, what was read beside the waves."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from benchrun.contract.capture import FloatArray
from benchrun.contract.reading import Reading
from benchrun.derive.results import OnePortData, Table
from benchrun.save.report.figures import Heading, fixed, heading, named, unit_of
from benchrun.save.report.grids import FREQUENCY, key_names
from benchrun.save.report.receivers import where
from benchrun.save.report.subject import Subject

#: What a flag means, by its word before the colon; {} is what stands behind it.
MEANINGS = {
    "over-limit": "{} was over its limit while it was read: the instrument or the bench file's range said so",
    "above-linear-limit": "receiver {} stood above the level up to which the bench file calls it linear",
    "compression-not-undone": "receiver {} was compressed beyond what its model can undo; the wave is as it was read",
    "reference-unlocked": "{} was not locked to its frequency reference",
    "tripped": "the supply's protection had switched {} off",
    "no-optimum-load": "|S22| + |T22| is not below 1: delivered power has no maximum, so no optimum load is stated",
}
#: How many places are told for each flag.
FEW_PLACES = 3
#: Lines of a Touchstone file's head that say what stands in the file and how far to trust it.
OF_TRUST = ("S11 column:", "Frequency:", "Calibration:", "Calibration residuals", "Uncertainty:")


@dataclass(frozen=True, slots=True)
class Flag:
    """A flag: its word, what it means, how many points carry it of how many, and where some of them are."""

    word: str
    meaning: str
    count: int
    total: int
    places: str


@dataclass(frozen=True, slots=True)
class Scalar:
    """What was read beside the waves: over the bench time (N,) in s, values (N,) in the unit of its key."""

    key: str
    heading: Heading
    time_s: FloatArray
    values: FloatArray

    def cells(self) -> tuple[str, ...]:
        """Return first, last, lowest, mean and highest value as texts."""
        sound = self.values[np.isfinite(self.values)]
        if sound.size == 0:
            return ("none",) * 5
        unit = unit_of(self.key)
        size, decimals = (unit.size, unit.decimals) if unit else (1.0, 4)
        return tuple(
            fixed(float(v) / size, decimals) for v in (sound[0], sound[-1], sound.min(), sound.mean(), sound.max())
        )


def flags(subject: Subject) -> list[Flag]:
    """Return the flags of the results' points where there are any, else of the readings; the most frequent first."""
    tables = [table for table in subject.results.tables if "flags" in table.columns]
    pairs = [pair for table in tables for pair in _of_table(table)] if tables else list(_of_readings(subject))
    found: dict[str, list[str]] = {}
    for word, place in pairs:
        found.setdefault(word, []).append(place)
    total = sum(len(table) for table in tables) if tables else subject.count
    ranked = sorted(found.items(), key=lambda item: (-len(item[1]), item[0]))
    return [Flag(word, meaning(word), len(places), total, _few(places)) for word, places in ranked]


def meaning(word: str) -> str:
    """Return what a flag says, for a person."""
    kind, _, what = word.partition(":")
    return MEANINGS.get(kind, "this version of benchrun does not explain it").format(what or "something")


def trust(subject: Subject) -> list[tuple[str, str, list[str]]]:
    """Return, for each quantity, its name, where its bound is largest, and the lines of that Touchstone file's head."""
    networks: dict[str, list[OnePortData]] = {}
    for network in subject.results.networks:
        networks.setdefault(network.quantity, []).append(network)
    return [_trusted(quantity, own, subject.results.tables) for quantity, own in networks.items()]


def scalars(subject: Subject) -> list[Scalar]:
    """Return everything that was read beside the waves, in the order of the run."""
    everything = sorted((r for own in subject.readings.values() for r in own), key=lambda r: r.started_ns)
    keys = dict.fromkeys(key for reading in everything for key in reading.scalars)
    return [_scalar(key, [r for r in everything if key in r.scalars]) for key in keys]


def readings(subject: Subject) -> list[tuple[str, ...]]:
    """Return a row for each name of readings: name, how many, tones, waves, points of each, how the tones were read."""
    rows: list[tuple[str, ...]] = []
    for name, own in subject.readings.items():
        one = own[0]
        captured = "" if len(one.tones) < 2 else "at one instant" if one.coherent else "one after the other"
        tones, waves = ", ".join(one.tones) or "none", ", ".join(one.waves) or "none"
        rows.append((name, str(len(own)), tones, waves, str(len(one.frequencies_hz)), captured))
    return rows


def _scalar(key: str, own: Sequence[Reading]) -> Scalar:
    time_s = np.array([reading.started_ns for reading in own], dtype=np.float64) * 1e-9
    return Scalar(key, heading(key), time_s, np.array([reading.scalars[key] for reading in own], dtype=np.float64))


def _of_table(table: Table) -> Iterator[tuple[str, str]]:
    words, keys = table.columns["flags"], key_names(table)
    for row in np.flatnonzero(words != ""):
        place = ", ".join(named(key, table.columns[key][row].item()) for key in keys)
        yield from ((word, place) for word in str(words[row]).split())


def _of_readings(subject: Subject) -> Iterator[tuple[str, str]]:
    for own in subject.readings.values():
        for reading in own:
            yield from ((word, where(reading)) for word in reading.flags)


def _few(places: Sequence[str]) -> str:
    told = "; ".join(dict.fromkeys(places[:FEW_PLACES]))
    return f"{told}; and {len(places) - FEW_PLACES} more" if len(places) > FEW_PLACES else told


def _trusted(quantity: str, own: Sequence[OnePortData], tables: Sequence[Table]) -> tuple[str, str, list[str]]:
    column = {"S22": "output_reflection_bound_ratio", "T22": "t22_bound_ratio"}.get(quantity, "")
    table = next((table for table in tables if column in table.columns), None)
    network = own[0] if table is None else _widest(own, table, column)
    place = ", ".join(named(key, value) for key, value in network.conditions.items())
    lines = [line for line in network.comments if line.startswith(OF_TRUST)]
    widest = table is not None and len(own) > 1
    return quantity, f"bound largest at {place}" if widest else place, lines


def _widest(own: Sequence[OnePortData], table: Table, column: str) -> OnePortData:
    """Return the network that holds the row with the largest bound."""
    row = int(np.nanargmax(table.columns[column].astype(np.float64)))
    keys = [key for key in key_names(table) if key != FREQUENCY]
    there = {key: table.columns[key][row].item() for key in keys}
    return next((network for network in own if dict(network.conditions) == there), own[0])
