"""The schedule: what will happen, in order. Pure and hashed; decoded by index, never a list in memory."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from benchrun.bench import Bench
from benchrun.contract.actions import ReadAction
from benchrun.contract.kinds import Kind
from benchrun.recipe import Recipe
from benchrun.recipe.model import Place
from benchrun.schedule.columns import Columns, all_rounds
from benchrun.schedule.drive import DRIVE, Driver
from benchrun.schedule.program import Node, ReadSite, Site, SweepNode, sites
from benchrun.schedule.scope import Scope
from benchrun.schedule.state import State
from benchrun.schedule.table import Table
from benchrun.schedule.timing import NS, Timetable
from benchrun.schedule.walk import PlannedAction, Walk

#: Readings that are worked out together where a walk looks ahead for levels, and for the level check.
AHEAD, CHUNK = 512, 1 << 15


@dataclass(frozen=True, slots=True)
class PlannedReading:
    """One reading as it is planned. `conditions` are named with their units, "pump.level_dbm"; words as they are."""

    index: int
    name: str
    conditions: Mapping[str, float | str]
    action: ReadAction
    position: Place


@dataclass(slots=True)
class Surroundings:
    """What walks and tables of one schedule share: how to make a state and a scope, each walk its own."""

    recipe: Recipe
    bench: Bench
    kinds: Mapping[str, Kind]
    driver: Driver | None
    bias: frozenset[str]

    def state(self) -> State:
        """Return a state in which nothing is in force."""
        return State(self.driver, self.bias, self.kinds)

    def scope(self) -> Scope:
        """Return a scope."""
        return Scope(self.recipe, self.bench, self.kinds, self.driver)

    def table(self) -> Table:
        """Return what works out columns."""
        return Table(self.driver, self.bias, self.scope(), self.bench.settables())


class Schedule:
    """Conditions and readings of a recipe on a bench, in order. Made by build_schedule()."""

    def __init__(
        self, body: Sequence[Node], around: Surroundings, timetable: Timetable, prompts: int, digest: str
    ) -> None:
        self._body, self._around, self._timetable = body, around, timetable
        self._sites = tuple(sites(body))
        self._drives = any(DRIVE in node.changes for node in body)
        self.hash = digest
        """SHA-256 (hexadecimal) of all that decides what happens."""
        self.prompts = prompts
        """How often the operator is asked."""

    def __len__(self) -> int:
        """Return the number of readings."""
        return sum(node.readings for node in self._body)

    @property
    def kinds(self) -> Mapping[str, Kind]:
        """Kind of each condition by its full name."""
        return self._around.kinds

    @property
    def bandwidth_hz(self) -> float:
        """Noise bandwidth of a reading: the recipe's IF bandwidth over its averages."""
        receiver = self._around.recipe.receiver
        return receiver.if_bandwidth / receiver.averages

    @property
    def places(self) -> tuple[tuple[ReadSite, int], ...]:
        """The places that read, each with the index of its first reading."""
        return tuple((site.read, site.offset) for site in self._sites)

    @property
    def duration_s(self) -> float:
        """Time that the whole schedule is expected to take."""
        return self._timetable.duration_ns / NS

    def start_ns(self, index: int) -> int:
        """Return when reading `index` starts, in ns from the beginning; len(self) gives the end. Raises IndexError."""
        if not 0 <= index <= len(self):
            raise IndexError(f"there is no reading {index}; the schedule has {len(self)}")
        return self._timetable.start_ns(index) if index < len(self) else self._timetable.duration_ns

    @property
    def axes_text(self) -> str:
        """The sweeps around the place that reads most: "17 drives x 81 frequencies"; "" where nothing is swept."""
        longest = max(self._sites, key=lambda site: len(site.sweeps), default=None)
        if longest is None:
            return ""
        return " x ".join(_counted(len(sweep.axis), sweep.axis.name) for sweep in longest.sweeps)

    def walk(self, start: int = 0) -> Iterator[PlannedAction]:
        """Yield every action in order; from a reading in the middle first what is needed to stand there.

        `start` may be len(self): what follows the last reading. Raises IndexError.
        """
        if not 0 <= start <= len(self):
            raise IndexError(f"there is no reading {start}; the schedule has {len(self)}")
        walk = Walk(self._around.state(), self._around.scope(), self._foresee if self._drives else None)
        if start == 0:
            return walk.all_of(self._body)
        return walk.from_reading(self._body, start) if start < len(self) else walk.after_last(self._body, start - 1)

    def reading(self, index: int) -> PlannedReading:
        """Return one reading. Raises IndexError."""
        if not 0 <= index < len(self):
            raise IndexError(f"there is no reading {index}; the schedule has {len(self)}")
        for planned in self.walk(index):
            if planned.reading_index == index and isinstance(planned.action, ReadAction):
                return PlannedReading(index, planned.action.name, planned.conditions, planned.action, planned.position)
        raise AssertionError("a walk from a reading takes that reading")

    def columns(self, chunk: int = CHUNK) -> Iterator[Columns]:
        """Yield the conditions of all readings as arrays, at most `chunk` at once, by place. Raises InputError."""
        for site in self._sites:
            for rounds in all_rounds(site, chunk):
                yield self._table.columns(site, rounds)

    def moments(self, chunk: int = CHUNK) -> Iterator[Columns]:
        """Yield what is in force between readings: after each set of a source, and where RF goes on before one."""
        for site in self._sites:
            for rounds in all_rounds(site, chunk):
                yield from self._table.moments(site, rounds)
        yield from self._table.moments_at_end(self._body, len(self))

    def _foresee(self, rounds: Sequence[tuple[SweepNode, int]]) -> None:
        """Work out the levels of the next readings all at once: one by one they would cost more than the walk."""
        sweep, k = rounds[-1]
        driver = self._around.driver
        if driver is None or k % AHEAD:
            return
        for site in self._sites:
            if site.sweeps and site.sweeps[-1] is sweep:
                self._learn(driver, site, rounds)

    def _learn(self, driver: Driver, site: Site, rounds: Sequence[tuple[SweepNode, int]]) -> None:
        _, k = rounds[-1]
        last = np.arange(k, min(k + AHEAD, len(site.sweeps[-1].axis)))
        outer = [np.full(len(last), round_, dtype=np.intp) for _, round_ in rounds[:-1]]
        values = self._table.columns(site, [*outer, last]).values
        if DRIVE in values and driver.frequency in values:
            drive, frequency = values[DRIVE], values[driver.frequency]
            known = np.isfinite(drive) & np.isfinite(frequency)
            driver.learn(drive[known], frequency[known])

    @cached_property
    def _table(self) -> Table:
        return self._around.table()


def _counted(count: int, name: str) -> str:
    if "." in name:
        return f"{count} values of {name}"
    plural = name[:-1] + "ies" if name.endswith("y") else name + "s"
    return f"{count} {name if count == 1 else plural}"
