"""Carries out the actions of a schedule, one after the other, as the state machine allows."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from typing import Any

from benchrun.acquire.access import Access
from benchrun.acquire.ahead import Ahead, Planned, Timetable
from benchrun.acquire.grid import Grid
from benchrun.acquire.machine import Event, Machine, Signals, Verb
from benchrun.acquire.opened import OpenBench
from benchrun.acquire.outputs import Outputs
from benchrun.acquire.progress import Progress
from benchrun.acquire.prompts import Prompt, Prompter
from benchrun.acquire.safe_state import lower
from benchrun.acquire.stop import StopRequest
from benchrun.acquire.take import TRIPPED, Taker
from benchrun.acquire.telling import Teller
from benchrun.acquire.witness import Witness
from benchrun.archive.meta import Event as Happening
from benchrun.archive.write import ArchiveWriter
from benchrun.contract.actions import AskAction, ProcedureAction, ReadAction, SetAction, SettleAction
from benchrun.contract.clock import Clock
from benchrun.contract.hooks import StepSpec
from benchrun.contract.reading import Reading
from benchrun.errors import InstrumentError, StoppedError

#: In virtual time the timetable begins at the next whole multiple of this: opening and preparing a bench takes less.
LEAD_NS = 5_000_000_000
#: A wait of this length is ended at once by a request to stop; a shorter one is soon over.
LONG_S = 0.2


@dataclass(frozen=True, slots=True)
class Surroundings:
    """Everything that an acquisition works with."""

    schedule: Timetable
    bench: OpenBench
    outputs: Outputs
    steps: Mapping[str, StepSpec]
    writer: ArchiveWriter
    clock: Clock
    prompter: Prompter
    progress: Progress
    stop: StopRequest


class Performer:
    """Does what a schedule says. Raises BenchError, StoppedError, KeyboardInterrupt: the runner makes safe."""

    def __init__(self, around: Surroundings, machine: Machine, witness: Witness) -> None:
        self.skipped = 0
        self._around = around
        self._machine = machine
        self._witness = witness
        self._grid = Grid(around.bench, around.outputs.signals)
        self._taker = Taker(around.bench, around.outputs, around.clock, witness, self._grid)
        self._teller = Teller(around.progress, around.schedule)
        self._skipping: list[int] | None = None
        self._radiating: tuple[str, ...] = ()
        self._origin_ns = 0
        self._does: Mapping[type, Callable[[Any, Ahead], None]] = {
            SetAction: self._set,
            SettleAction: self._settle,
            ReadAction: self._read,
            AskAction: self._ask,
            ProcedureAction: self._work,
        }

    @property
    def flagged(self) -> int:
        """How many readings were flagged."""
        return self._teller.flagged

    def begin(self) -> None:
        """Start the timetable now; in virtual time always at the same moment, so that a rehearsal can be done again."""
        clock = self._around.clock
        clock.align((clock.now_ns() // LEAD_NS + 1) * LEAD_NS)
        self._origin_ns = clock.now_ns()
        self._teller.begin()

    def perform(self, schedule: Iterable[Ahead]) -> None:
        """Carry out a schedule; return at its end, or where a stop was asked for."""
        does, stop = self._does, self._around.stop
        for ahead in schedule:
            if stop.reason:
                return
            action = ahead.planned.action
            if self._skipping is None or isinstance(action, AskAction):
                does[type(action)](action, ahead)
            else:
                self._skip(ahead.planned)

    def finish(self) -> None:
        """Write down what is not written yet."""
        self._end_skipping()

    # RF

    def _feed(self, event: Event, signals: Signals = ()) -> None:
        """Tell the machine, and switch RF as it says."""
        sources = self._grid.sources
        for verb, signal in self._machine.feed(event, signals):
            if signal:
                sources[signal].output(verb is Verb.RF_ON)

    def _radiate(self, signals: tuple[str, ...]) -> None:
        """Have exactly these signals on; nothing is done where that is so already."""
        if signals != self._radiating or not signals:
            self._feed(Event.RADIATE if signals else Event.REST, signals)
            self._radiating = signals

    def _blanked(self, moving: Signals, change: Callable[[], None]) -> None:
        """Do something that moves signals in frequency, with those off; afterwards what was on is on again."""
        radiating = self._machine.rf
        if radiating.isdisjoint(moving):
            change()
            return
        self._feed(Event.HOP, moving)
        change()
        self._feed(Event.RADIATE, radiating)

    # Actions

    def _set(self, action: SetAction, _ahead: Ahead) -> None:
        self._blanked(self._grid.hopping(action), lambda: self._grid.set(action))

    def _settle(self, action: SettleAction, ahead: Ahead) -> None:
        """Let RF settle, with the receiver set up before for the reading that follows."""
        if isinstance(ahead.following, ReadAction):
            self._set_up(ahead.following)
        self._radiate(action.signals)
        clock = self._around.clock
        if clock.virtual or action.duration_s < LONG_S:
            clock.sleep(action.duration_s)
            return
        with self._around.stop.waiting():
            clock.sleep(action.duration_s)

    def _set_up(self, action: ReadAction) -> None:
        """Set the receiver up for a reading, blanked where that moves a signal."""
        capture = action.capture
        if capture is not None and capture.waves and not self._grid.stands(capture):
            self._blanked(self._grid.moving(capture), lambda: self._grid.set_up(capture))

    def _read(self, action: ReadAction, ahead: Ahead) -> None:
        planned, machine = ahead.planned, self._machine
        if planned.reading_index is None:
            raise RuntimeError("a reading without a number in the schedule")
        self._set_up(action)
        self._radiate(action.signals)
        machine.feed(Event.READ)
        drains = self._around.outputs.drains_below_v if machine.bias_up else ()
        start_ns = self._origin_ns + ahead.start_ns
        reading = self._taker.take(planned.reading_index, action, planned.conditions, start_ns, drains)
        machine.feed(Event.TAKEN)
        self._around.writer.commit(reading)
        machine.feed(Event.COMMITTED)
        self._teller.committed(reading, ahead.start_ns)
        if reading.flags:
            self._require_untripped(reading)

    @staticmethod
    def _require_untripped(reading: Reading) -> None:
        tripped = [flag.partition(":")[2] for flag in reading.flags if flag.startswith(TRIPPED)]
        if tripped:
            raise InstrumentError(
                f"the protection of {tripped[0]} has tripped, seen with reading {reading.index} '{reading.name}'. "
                "Find out why before the trip is cleared"
            )

    def _work(self, action: ProcedureAction, _ahead: Ahead) -> None:
        around = self._around
        execute = around.steps[action.step].execute
        if execute is None:
            raise RuntimeError(f"step {action.step} has a procedure in the schedule and no way to execute it")
        said: list[str] = []

        def say(text: str) -> None:
            said.append(text)
            around.progress.phase(action.step, text)

        access = Access(around.bench, around.outputs, around.clock, around.stop, say)
        self._feed(Event.WORK)
        self._radiating = ()
        found = execute(action.parameters, access)
        self._machine.feed(Event.WORKED, bias_up=access.used_bias or self._machine.bias_up)
        self._grid.forget()
        self._log(
            "procedure", ". ".join(said) or action.step, step=action.step, parameters=action.parameters, found=found
        )

    def _ask(self, action: AskAction, _ahead: Ahead) -> None:
        self._end_skipping()
        around = self._around
        self._feed(Event.ASK)
        self._radiating = ()
        self._grid.forget()
        report = lower(around.bench, around.outputs, around.clock, self._witness.look)
        if not report.safe:
            raise InstrumentError(f"before the operator was asked: {'; '.join(report.reasons)}")
        self._feed(Event.LOWERED)
        around.progress.pause()
        since_s = time.monotonic()
        with around.stop.waiting():
            answer = around.prompter.ask(Prompt(action.text, action.cautions, self._confirmed(), action.connect))
        self._teller.leave_out(time.monotonic() - since_s)
        self._log("operator", action.text, answer=answer, read_back=report.text, connect=action.connect)
        if answer == "stop":
            raise StoppedError(f"the operator stopped at: {action.text}")
        self._feed(Event.ANSWERED)
        self._skipping = [] if answer == "skip" else None

    def _confirmed(self) -> str:
        what = " and ".join(["RF off", *(f"{drain} off" for drain in self._around.outputs.drains_below_v)])
        return f"{what}, read back at {time.strftime('%H:%M:%S')}."

    # Skipping: what was not connected is not measured, and is not made up

    def _skip(self, planned: Planned) -> None:
        """Pass over an action that hangs on a connection that was not made; settings of signals are kept up."""
        action = planned.action
        if isinstance(action, SetAction):
            kept = tuple(
                (name, value)
                for name, value in action.values
                if name.partition(".")[0] not in self._around.outputs.bias_limits
            )
            self._grid.set(SetAction(kept))
        elif planned.reading_index is not None and self._skipping is not None:
            self._skipping.append(planned.reading_index)
            self.skipped += 1

    def _end_skipping(self) -> None:
        skipped, self._skipping = self._skipping, None
        if skipped:
            self._log(
                "skipped", f"{len(skipped)} readings were skipped by the operator", first=skipped[0], last=skipped[-1]
            )

    def _log(self, kind: str, text: str, **detail: Any) -> None:
        self._around.writer.log(Happening(kind, text, detail, self._around.clock.now_ns()))
