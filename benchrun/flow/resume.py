"""Taking up a run that was cut off, at its first missing reading, with the inputs and calibrations in its archive.

unchanged.py says what must be as it was, seam.py what happens where the old readings end and the new ones begin.
"""

from __future__ import annotations

import tempfile
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from benchrun.acquire.clock import RealClock
from benchrun.acquire.progress import Progress
from benchrun.acquire.prompts import Prompter, RehearsalPrompter, require_somebody
from benchrun.archive import ArchiveReader, Event, Meta, open_archive
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
from benchrun.flow.seam import Seam, SeamWriter, connected_before, seam_of
from benchrun.flow.unchanged import (
    begun_with,
    planned_again,
    require_calibrations,
    require_same_bench,
    require_software,
    require_unchanged,
)
from benchrun.schedule import Schedule


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
        seam, start_ns = seam_of(archive, schedule, remembers=_remembers(inputs, meta)), _start_ns(archive)
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
        _require_real(archive.meta, inputs)
    require_unchanged(archive.meta, inputs, folder)
    return inputs, known


def _require_real(meta: Meta, inputs: Inputs) -> None:
    if meta.origin == REAL and inputs.bench.simulated:
        raise InputError(
            f"{inputs.bench.path}: this bench is marked simulated, and the run was made on the real one. "
            "They are never mixed. Nothing was switched on."
        )


def _nothing(archive: ArchiveReader) -> str:
    there = f"{archive.count} of {archive.meta.readings_planned} readings"
    return (
        f"There is nothing to resume: this run is complete, with {there}. "
        f"`benchrun derive {archive.path.parent}` makes results of it again."
    )


def _remembers(inputs: Inputs, meta: Meta) -> bool:
    """Whether the device remembers what was done to it: every real one does."""
    rehearsal = inputs.bench.rehearsal
    return meta.origin == REAL or rehearsal is None or rehearsal.thermal_memory


def _start_ns(archive: ArchiveReader) -> int:
    """Return where in the bench's time the run began."""
    found = next((event.detail.get("start_ns", 0) for event in archive.log("bench-time")), 0)
    if type(found) is not int or found < 0:
        raise FolderError(f"{archive.path}: where the run began in the bench's time makes no sense ({found!r:.40}).")
    return found


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
