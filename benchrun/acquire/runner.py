"""Acquisition: walks a schedule on an open bench, commits every reading, and leaves the bench safe on every way out."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import TYPE_CHECKING

from benchrun.acquire import ending
from benchrun.acquire.ahead import Timetable, look_ahead
from benchrun.acquire.machine import Event, Machine
from benchrun.acquire.opened import OpenBench
from benchrun.acquire.outcome import Outcome, attach
from benchrun.acquire.outputs import outputs_of
from benchrun.acquire.performer import Performer, Surroundings
from benchrun.acquire.progress import Progress
from benchrun.acquire.prompts import Prompter, require_somebody
from benchrun.acquire.safe_state import SafeReport, make_safe
from benchrun.acquire.stop import StopRequest
from benchrun.acquire.witness import Witness
from benchrun.archive.meta import Event as Happening
from benchrun.archive.write import ArchiveWriter
from benchrun.contract.clock import Clock
from benchrun.contract.hooks import StepSpec
from benchrun.errors import DiskError, InstrumentError

if TYPE_CHECKING:
    from benchrun.bench.model import Bench


def acquire(
    schedule: Timetable,
    open_bench: OpenBench,
    bench: Bench,
    steps: Mapping[str, StepSpec],
    writer: ArchiveWriter,
    clock: Clock,
    prompter: Prompter,
    progress: Progress,
    *,
    start: int = 0,
    stop: StopRequest | None = None,
) -> Outcome:
    """Carry out a schedule from reading `start` on and return how it ended: complete, everything confirmed off.

    Every other end is raised, with the Outcome attached (outcome_of): StoppedError after Ctrl-C, SIGTERM, SIGHUP or the
    operator's word; BenchError for what an instrument, a link or the disk did; UnsafeError where something could not be
    confirmed to be off, whatever came before. Without an Outcome: InputError where the schedule asks the operator and
    nobody is there; nothing was switched on. All committed readings are in the archive in each case. Bench and archive
    are opened and closed by the caller.
    """
    require_somebody(schedule.prompts, prompter)
    around = Surroundings(
        schedule, open_bench, outputs_of(bench), steps, writer, clock, prompter, progress, stop or StopRequest()
    )
    with around.stop.listening():
        return _Run(around, start).to_end()


class _Run:
    """One acquisition from rest to rest."""

    def __init__(self, around: Surroundings, start: int) -> None:
        self._around = around
        self._start = start
        self._machine = Machine()
        self._witness = Witness(lambda: around.bench.receiver)
        self._performer = Performer(around, self._machine, self._witness)
        self._before = around.writer.readings

    def to_end(self) -> Outcome:
        """Run, make safe, write down how it went; return, or raise what went wrong."""
        error = self._way_out()
        said = ending.last_exchanges(self._around.bench) if ending.is_failure(error) else ()
        report = self._made_safe()
        if not report.safe:
            said = (*said, *ending.last_exchanges(self._around.bench))
        outcome = self._outcome(error, report)
        error = self._written_down(outcome, said, error)
        if error is None and report.safe:
            self._around.progress.phase("bring-down", report.text)
            return outcome
        raised = ending.explained(error, outcome, self._around)
        attach(raised, outcome)
        if raised is error:
            raise raised
        raise raised from error

    def _way_out(self) -> BaseException | None:
        """Carry out the schedule; return what ended it early, None where nothing did."""
        stop = self._around.stop
        try:
            self._begin()
            self._performer.begin()
            ahead = look_ahead(self._around.schedule, self._start, timed=self._around.clock.virtual)
            self._performer.perform(ahead)
            stopped = KeyboardInterrupt() if stop.requested else None
            stop.deaf = True  # before the machine moves on: from there nothing but making safe is allowed
            self._machine.feed(Event.STOP if stopped else Event.END)
        except BaseException as error:  # every way out, also SystemExit, goes through the safe state
            stop.deaf = True  # nothing is called before this: no signal can come between
            self._machine.feed(Event.FAIL)
            return error
        return stopped

    def _begin(self) -> None:
        """Bring the bench to rest in the safe state's order, whatever it was doing before, and prepare it."""
        around = self._around
        report = make_safe(around.bench, around.outputs, around.clock)
        if not report.safe:
            raise InstrumentError(f"the bench cannot be brought to rest: {'; '.join(report.reasons)}")
        around.bench.prepare()
        self._see_reference()

    def _see_reference(self) -> None:
        """Write down which instruments are locked to the common reference; readings are flagged one by one."""
        around = self._around
        locked = {name: around.bench.signal(name).locked() for name in around.outputs.signals}
        text = ", ".join(f"{name} {'locked' if there else 'NOT locked'}" for name, there in locked.items())
        around.writer.log(Happening("reference", text, locked, around.clock.now_ns()))
        if not all(locked.values()):
            around.progress.message(f"reference: {text}. Readings are flagged; check the reference's cable")

    def _made_safe(self) -> SafeReport:
        around = self._around
        report = make_safe(around.bench, around.outputs, around.clock, self._witness.look)
        self._machine.feed(Event.CONFIRMED if report.safe else Event.UNCONFIRMED)
        return report

    def _outcome(self, error: BaseException | None, report: SafeReport) -> Outcome:
        return Outcome(
            state=ending.state(error, report),
            readings=self._around.writer.readings - self._before,
            planned=len(self._around.schedule),
            flagged=self._performer.flagged,
            skipped=self._performer.skipped,
            safe=report,
            cause=ending.cause(error, self._around.stop),
        )

    def _written_down(
        self, outcome: Outcome, said: Iterable[ending.Said], error: BaseException | None
    ) -> BaseException | None:
        """Log the end; return the error that the run ends with, which is the disk's where nothing else went wrong."""
        try:
            self._performer.finish()
            ending.log(self._around, outcome, said, error)
        except DiskError as disk:
            return error or disk
        return error
