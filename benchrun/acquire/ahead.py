"""The schedule as the acquisition takes it: in batches, each action with what it must know of the one behind it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from itertools import islice
from typing import NamedTuple, Protocol

from benchrun.acquire.telling import Length
from benchrun.contract.actions import Action

#: How many actions the schedule is asked for at once: one by one, between exchanges, each costs three times as much.
BATCH = 96


class Planned(Protocol):
    """An action of the schedule, what is in force when it is done, and the number of the reading that it takes."""

    @property
    def action(self) -> Action:
        """What is to be done."""

    @property
    def conditions(self) -> Mapping[str, float | str]:
        """What is in force."""

    @property
    def reading_index(self) -> int | None:
        """The reading's number, None where it takes none."""


class Timetable(Length, Protocol):
    """The schedule, as far as the acquisition goes."""

    prompts: int
    """How often the operator is asked."""

    def walk(self, start: int = 0) -> Iterator[Planned]:
        """Yield the actions, from a reading on."""

    def start_ns(self, index: int) -> int:
        """Return when a reading is planned to start."""


class Ahead(NamedTuple):
    """A planned action, the action behind it (None: nothing), and when its reading is planned to start.

    `start_ns` is 0 where it takes no reading, or where nobody needs to know.
    """

    planned: Planned
    following: Action | None
    start_ns: int


def look_ahead(schedule: Timetable, start: int, *, timed: bool) -> Iterator[Ahead]:
    """Yield the actions of a schedule from a reading on; the starts of readings are looked up where `timed`."""
    walk = schedule.walk(start)
    here = next(walk, None)
    while here is not None:
        batch = [here]
        batch += islice(walk, BATCH)
        here = batch.pop() if len(batch) > BATCH else None
        following = [*(planned.action for planned in batch[1:]), here.action if here else None]
        indices = [planned.reading_index if timed else None for planned in batch]
        starts_ns = [0 if index is None else schedule.start_ns(index) for index in indices]
        yield from map(Ahead, batch, following, starts_ns)
