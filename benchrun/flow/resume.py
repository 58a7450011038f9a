"""Taking up a run that was cut off, at its first missing reading: what must be the same, the bench, and the seam.

Inputs and calibrations are those in the archive. A device that remembers (every real one; a simulated one with thermal
memory) is not where it was: with what the last committed reading asked for in force it is let settle as the recipe
says, and that reading is taken again, as a further attempt, before the first missing one; both are flagged. The
attempt is the final one, because it belongs to what comes after it; the one before stays in the archive, and how far
apart they are is logged. Where the operator is asked between the two, RF and drain were down there anyway, and nothing
is read again.
"""

from __future__ import annotations

import tempfile
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, replace
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import numpy as np

from benchrun.acquire.clock import RealClock
from benchrun.acquire.progress import Progress
from benchrun.acquire.prompts import Prompter, RehearsalPrompter, require_somebody
from benchrun.archive import ArchiveReader, ArchiveWriter, Event, Meta, open_archive
from benchrun.contract.actions import AskAction
from benchrun.contract.clock import Clock
from benchrun.contract.reading import Reading
from benchrun.errors import FolderError, InputError
from benchrun.flow.folders import require_run
from benchrun.flow.inputs import Inputs
from benchrun.flow.measure import Setting, carry_out
from benchrun.flow.planning import Known
from benchrun.flow.produce import restored
from benchrun.flow.rehearse import NOTE, Shifted, rehearsal_of
from benchrun.flow.result import RunResult
from benchrun.flow.run import REAL
from benchrun.flow.unchanged import (
    begun_with,
    planned_again,
    require_calibrations,
    require_same_bench,
    require_software,
    require_unchanged,
)
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


def resume(run: Path, *, bench: Path | None = None, listener: Progress, prompter: Prompter) -> RunResult:
    """Take up a run at its first missing reading and bring it to its end; one that is complete is left as it is.

    `bench` stands in for the archive's bench file where the instruments are reached in another way; all else in it must
    be the same. Raises BenchrunError: InputError where software, files, bench or calibrations are not those that the
    run began with, IdentityError where other instruments answer; nothing is mixed.
    """
    folder = require_run(run)
    with open_archive(folder) as archive, tempfile.TemporaryDirectory() as place:
        meta = archive.meta
        if meta.state == "complete":
            return RunResult(folder, meta.state, message=_nothing(archive))
        require_software(meta, folder)
        inputs, known = _inputs(archive, Path(place), bench, folder)
        schedule = planned_again(meta, inputs, known, folder)
        seam, start_ns = _seam(archive, inputs, schedule), _start_ns(archive)
        archive.close()
        with _setting(inputs, meta, schedule, seam, start_ns, listener, prompter) as setting:
            return _taken_up(inputs, schedule, known, setting, folder, meta, seam)


def _inputs(archive: ArchiveReader, place: Path, bench: Path | None, folder: Path) -> tuple[Inputs, Known]:
    """Return what the run began with, seen to be unchanged. Raises InputError, CalibrationError."""
    inputs, known = restored(archive.meta, place), begun_with(archive)
    require_calibrations(archive, inputs.recipe.calibrations, known, folder)
    if bench is not None:
        before, inputs = inputs, restored(archive.meta, place, bench)
        require_same_bench(before, inputs, folder)
    require_unchanged(archive.meta, inputs, folder)
    return inputs, known


def _nothing(archive: ArchiveReader) -> str:
    there = f"{archive.count} of {archive.meta.readings_planned} readings"
    return (
        f"There is nothing to resume: this run is complete, with {there}. "
        f"`benchrun derive {archive.path.parent}` makes results of it again."
    )


def _first_missing(archive: ArchiveReader) -> int:
    """Return the first reading behind all that were committed, or passed over because the operator said so."""
    skipped = [int(event.detail["last"]) for event in archive.log("skipped")]
    return 1 + max(archive.last_index, *skipped, -1)


def _start_ns(archive: ArchiveReader) -> int:
    """Return where in the bench's time the run began."""
    return next((int(event.detail.get("start_ns", 0)) for event in archive.log("bench-time")), 0)


def _seam(archive: ArchiveReader, inputs: Inputs, schedule: Schedule) -> Seam:
    """Return the seam; nothing is read again where nothing is missing, or nothing remembers."""
    first = _first_missing(archive)
    before = archive.attempts(first - 1)
    rehearsal, real = inputs.bench.rehearsal, archive.meta.origin == REAL
    marked = 0 < first < len(schedule) and (real or rehearsal is None or rehearsal.thermal_memory)
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


@contextmanager
def _setting(
    inputs: Inputs,
    meta: Meta,
    schedule: Schedule,
    seam: Seam,
    start_ns: int,
    listener: Progress,
    prompter: Prompter,
) -> Iterator[Setting]:
    """Yield where the run goes on: on the real bench, or on the simulated one of the archive's seed."""
    who = meta.identities or None
    backend, origin, start = inputs.bench.visa.backend, meta.origin, seam.start
    runs = Path()
    if meta.origin == REAL:
        clock = _continued(RealClock(), seam.before)
        yield Setting(runs, clock, backend, {}, origin, None, listener, prompter, start=start, who=who)
        return
    with rehearsal_of(inputs, meta.seed, real_time=False) as world:
        _require_seed(meta, world.seed, inputs)
        world.clock.align(start_ns)
        for plane, what in connected_before(schedule, start):
            world.connect(plane, what)
        yield Setting(
            runs, Shifted(world.clock, start_ns), world.visa_library or backend, world.addresses, origin, meta.seed,
            listener, RehearsalPrompter(world.connect), NOTE, start_ns, start, who,
        )  # fmt: skip


def _require_seed(meta: Meta, seed: int, inputs: Inputs) -> None:
    if seed != meta.seed:
        raise InputError(
            f"{inputs.bench.path}: points at a bench that is simulated with seed {seed}, and the run was rehearsed "
            f"with seed {meta.seed}. Serve it again: `benchrun simulate --seed {meta.seed} --write-bench FILE`, and "
            "resume with --bench FILE."
        )


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


def _continued(clock: Clock, before: Reading | None) -> Clock:
    """Return a real clock on which as much time has passed since the last reading as on the wall."""
    if before is None:
        return clock
    since_s = (datetime.now(UTC) - datetime.fromisoformat(before.started_utc)).total_seconds()
    return Shifted(clock, clock.now_ns() - before.started_ns - max(0, round(since_s * 1e9)))


def _taken_up(
    inputs: Inputs, schedule: Schedule, known: Known, setting: Setting, folder: Path, meta: Meta, seam: Seam
) -> RunResult:
    require_somebody(schedule.prompts, setting.prompter)
    writer = SeamWriter.append(folder)
    try:
        writer.seam = seam
        _require_alone(writer, seam, folder)
        setting.listener.begin(inputs.recipe.title, len(schedule), setting.note)
        setting.listener.message(_said(seam, len(schedule)))
        writer.update(state="running", ended_utc="")
        writer.log(Event("resumed", _said(seam, len(schedule)), _detail(seam, meta)))
        return carry_out(writer, inputs, schedule, known, setting, folder)
    except BaseException as error:  # also a defect of ours and Ctrl-C: what was committed is in this folder
        error.__dict__.setdefault("folder", folder)
        raise
    finally:
        writer.close()


def _require_alone(writer: SeamWriter, seam: Seam, folder: Path) -> None:
    """Raise FolderError where somebody else has added readings while this was being prepared."""
    if writer.readings != seam.committed:
        raise FolderError(f"{folder}: another benchrun has taken this run up just now. Try again when it has ended.")


def _said(seam: Seam, planned: int) -> str:
    if seam.first >= planned:
        return f"Resumed: all {planned} readings are there; what comes after them is done."
    again = "" if seam.again is None else f"; reading {seam.again} is taken again before it"
    return f"Resumed at reading {seam.first} of {planned}{again}."


def _detail(seam: Seam, meta: Meta) -> Mapping[str, Any]:
    return {"index": seam.first, "again": seam.again, "state_before": meta.state, "began_with": dict(meta.versions)}


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
