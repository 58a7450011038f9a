"""The seam in a run that is taken up: where it is, what is read again before it, and how both sides of it are marked.

A device that remembers (every real one; a simulated one with thermal memory) is not where it was: with what the last
committed reading asked for in force it is let settle as the recipe says, and that reading is taken again, as a further
attempt, before the first missing one; both are flagged. The attempt is the final one, because it belongs to what comes
after it; the one before stays in the archive, and how far apart they are is logged. Where the operator is asked between
the two, RF and drain were down there anyway, and nothing is read again.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from benchrun.archive import ArchiveReader, ArchiveWriter, Event
from benchrun.contract.actions import AskAction
from benchrun.contract.reading import Reading
from benchrun.errors import FolderError
from benchrun.schedule import Schedule

#: Flags the readings on both sides of a seam.
RESUMED = "resumed"


@dataclass(frozen=True, slots=True)
class Seam:
    """Where a run is taken up: the first missing reading, what is read again before it (None: nothing), as which try.

    `before` is the last committed reading, None where there is none; `marked` says whether readings are flagged;
    `committed` attempts there are.
    """

    first: int
    again: int | None
    attempt: int
    before: Reading | None
    marked: bool
    committed: int

    @property
    def start(self) -> int:
        """The reading that the bench is brought to."""
        return self.first if self.again is None else self.again


class SeamWriter(ArchiveWriter):
    """An archive that is added to, and marks the seam in what is committed on both of its sides."""

    seam: Seam

    def commit(self, reading: Reading) -> None:
        """Write one reading: on the seam as a further attempt where it is read again, and flagged."""
        seam = self.seam
        if reading.index == seam.again:
            reading = replace(reading, attempt=seam.attempt + reading.attempt)
        if seam.marked and reading.index in (seam.again, seam.first):
            reading = replace(reading, flags=(*reading.flags, RESUMED))
        super().commit(reading)
        if seam.before is not None and (reading.index, reading.attempt) == (seam.again, seam.attempt):
            apart = apart_db(seam.before, reading)
            text = f"reading {reading.index} was read again: at most {apart:.3f} dB from what it was"
            self.log(Event("seam", text, {"index": reading.index, "largest_db": apart}, reading.ended_ns))


def _first_missing(archive: ArchiveReader) -> int:
    """Return the first reading behind all that were committed, or passed over because the operator said so."""
    try:
        skipped = [int(event.detail["last"]) for event in archive.log("skipped")]
    except (KeyError, TypeError, ValueError) as error:
        raise FolderError(
            f"{archive.path}: its log of readings that were passed over makes no sense ({error})."
        ) from error
    return 1 + max(archive.last_index, *skipped, -1)


def seam_of(archive: ArchiveReader, schedule: Schedule, *, remembers: bool) -> Seam:
    """Return the seam; nothing is read again where nothing is missing, or the device does not remember."""
    first = _first_missing(archive)
    before = archive.attempts(first - 1)
    marked = remembers and 0 < first < len(schedule)
    again = first - 1 if marked and before and not _asked_between(schedule, first - 1, first) else None
    attempt = before[-1].attempt + 1 if before else 0
    return Seam(first, again, attempt, before[-1] if before else None, marked, archive.count_all)


def _asked_between(schedule: Schedule, index: int, following: int) -> bool:
    """Whether the operator is asked for something between two readings."""
    passed = False
    for planned in schedule.walk(index):
        if planned.reading_index == following:
            return False
        passed = passed or planned.reading_index == index
        if passed and isinstance(planned.action, AskAction):
            return True
    return False


def connected_before(schedule: Schedule, start: int) -> list[tuple[str, str]]:
    """Return the connections (plane, what) that had been made before a reading, but for those that are asked again.

    Each mating differs a little from the one before: the simulated bench must have seen as many.
    """
    made, again = _connections(schedule, 0, start), _connections(schedule, start, start)
    for plane, _ in again:
        made.pop(max(n for n, (other, _) in enumerate(made) if other == plane))
    return made


def _connections(schedule: Schedule, begin: int, end: int) -> list[tuple[str, str]]:
    """Return what is to be connected on the way from one reading up to another."""
    found = []
    for planned in schedule.walk(begin):
        if planned.reading_index is not None and planned.reading_index >= end:
            break
        if isinstance(planned.action, AskAction) and planned.action.connect is not None:
            found.append(planned.action.connect)
    return found


def apart_db(one: Reading, other: Reading) -> float:
    """Return how far apart two readings of one condition are: largest difference of a wave to the largest wave, dB.

    Of readings without waves it is the scalars' largest relative difference. 0 where nothing can be compared.
    """
    before, after = one.data.ravel(), other.data.ravel()
    if before.size == 0 or before.shape != after.shape:
        before, after = (np.array([r.scalars[key] for key in sorted(one.scalars)]) for r in (one, other))
    scale = float(np.max(np.abs(before), initial=0.0))
    if scale == 0.0:
        return 0.0
    return float(20.0 * np.log10(1.0 + np.max(np.abs(after - before)) / scale))
