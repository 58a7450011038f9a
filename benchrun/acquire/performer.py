"""Carries out the actions of a schedule, one after the other, as the state machine allows."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Protocol

from benchrun.acquire.access import Access
from benchrun.acquire.grid import Grid
from benchrun.acquire.machine import Event, Machine, Verb
from benchrun.acquire.opened import OpenBench
from benchrun.acquire.outputs import Outputs
from benchrun.acquire.progress import Progress
from benchrun.acquire.prompts import Prompt, Prompter
from benchrun.acquire.safe_state import lower
from benchrun.acquire.stop import StopRequest
from benchrun.acquire.take import TRIPPED, Taker
from benchrun.acquire.witness import Witness
from benchrun.archive.meta import Event as Happening
from benchrun.archive.write import ArchiveWriter
from benchrun.contract.actions import Action, AskAction, ProcedureAction, ReadAction, SetAction, SettleAction
from benchrun.contract.clock import Clock
from benchrun.contract.hooks import StepSpec
from benchrun.contract.reading import Reading
from benchrun.errors import InstrumentError, StoppedError

#: In virtual time the timetable begins at the next whole multiple of this: opening and preparing a bench takes less.
LEAD_NS = 5_000_000_000


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


class Timetable(Protocol):
    """The schedule, as far as the acquisition goes."""

    @property
    def duration_s(self) -> float:
        """How long all of it is expected to take."""

    def __len__(self) -> int:
        """Return the number of readings."""

    def walk(self, start: int = 0) -> Iterator[Planned]:
        """Yield the actions, from a reading on."""

    def start_ns(self, index: int) -> int:
        """Return when a reading is planned to start."""


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
        self.flagged = 0
        self.skipped = 0
        self._around = around
        self._machine = machine
        self._witness = witness
        self._bench = around.bench
        self._grid = Grid(around.bench, around.outputs.signals)
        self._taker = Taker(around.bench, around.outputs, around.clock, witness)
        self._skipping: list[int] | None = None
        self._origin_ns = 0
        self._started_s = 0.0
        self._asked_s = 0.0
        self._phase = ""
        self._does: Mapping[type, Callable[[Any, Planned], None]] = {
            SetAction: self._set,
            SettleAction: self._settle,
            ReadAction: self._read,
            AskAction: self._ask,
            ProcedureAction: self._work,
        }

    def begin(self) -> None:
        """Start the timetable now; in virtual time always at the same moment, so that a rehearsal can be done again."""
        clock = self._around.clock
        clock.align((clock.now_ns() // LEAD_NS + 1) * LEAD_NS)
        self._origin_ns = clock.now_ns()
        self._started_s = time.monotonic()

    def perform(self, planned: Planned, following: Action | None) -> None:
        """Carry out one action; for a reading `following` it the receiver is set up before RF settles."""
        action = planned.action
        if self._skipping is not None and not isinstance(action, AskAction):
            self._skip(planned)
            return
        if isinstance(action, SettleAction) and isinstance(following, ReadAction):
            self._set_up(following)
        self._does[type(action)](action, planned)

    def finish(self) -> None:
        """Write down what is not written yet."""
        self._end_skipping()

    # RF

    def _feed(self, event: Event, signals: Iterable[str] = ()) -> None:
        """Tell the machine, and switch RF as it says."""
        for verb, signal in self._machine.feed(event, signals):
            if verb is Verb.RF_OFF:
                self._bench.signal(signal).output(False)
            elif verb is Verb.RF_ON:
                self._bench.signal(signal).output(True)

    def _blanked(self, moving: Iterable[str], change: Callable[[], None]) -> None:
        """Do something that moves signals in frequency, with those off; afterwards what was on is on again."""
        radiating = self._machine.rf
        if radiating.isdisjoint(moving := tuple(moving)):
            change()
            return
        self._feed(Event.HOP, moving)
        change()
        self._feed(Event.RADIATE, radiating)

    # Actions

    def _set(self, action: SetAction, _planned: Planned) -> None:
        self._blanked(self._grid.hopping(action), lambda: self._grid.set(action))

    def _settle(self, action: SettleAction, _planned: Planned) -> None:
        self._feed(Event.RADIATE if action.signals else Event.REST, action.signals)
        clock = self._around.clock
        if clock.virtual:
            clock.sleep(action.duration_s)
            return
        with self._around.stop.waiting():
            clock.sleep(action.duration_s)

    def _set_up(self, action: ReadAction) -> None:
        """Set the receiver up for a reading, blanked where that moves a signal."""
        capture = action.capture
        if capture is not None and capture.waves and not self._grid.stands(capture):
            self._blanked(self._grid.moving(capture), lambda: self._grid.set_up(capture))

    def _read(self, action: ReadAction, planned: Planned) -> None:
        around, index = self._around, planned.reading_index
        if index is None:
            raise RuntimeError("a reading without a number in the schedule")
        self._set_up(action)
        self._feed(Event.RADIATE if action.signals else Event.REST, action.signals)
        self._feed(Event.READ)
        drains = around.outputs.drains_below_v if self._machine.bias_up else ()
        start_ns = self._origin_ns + around.schedule.start_ns(index)
        reading = self._taker.take(index, action, planned.conditions, start_ns, drains)
        self._feed(Event.TAKEN)
        around.writer.commit(reading)
        self._feed(Event.COMMITTED)
        self._tell(reading)
        self._require_untripped(reading)

    @staticmethod
    def _require_untripped(reading: Reading) -> None:
        tripped = [flag.partition(":")[2] for flag in reading.flags if flag.startswith(TRIPPED)]
        if tripped:
            raise InstrumentError(
                f"the protection of {tripped[0]} has tripped, seen with reading {reading.index} '{reading.name}'. "
                "Find out why before the trip is cleared"
            )

    def _work(self, action: ProcedureAction, _planned: Planned) -> None:
        around = self._around
        execute = around.steps[action.step].execute
        if execute is None:
            raise RuntimeError(f"step {action.step} has a procedure in the schedule and no way to execute it")
        said: list[str] = []
        access = Access(around.bench, around.outputs, around.clock, around.stop, said.append)
        self._feed(Event.WORK)
        found = execute(action.parameters, access)
        self._machine.feed(Event.WORKED, bias_up=access.used_bias or self._machine.bias_up)
        self._grid.forget()
        around.progress.phase(action.step, ". ".join(said))
        self._log(
            "procedure", ". ".join(said) or action.step, step=action.step, parameters=action.parameters, found=found
        )

    def _ask(self, action: AskAction, _planned: Planned) -> None:
        self._end_skipping()
        around = self._around
        self._feed(Event.ASK)
        self._grid.forget()
        report = lower(around.bench, around.outputs, around.clock, self._witness.look)
        if not report.safe:
            raise InstrumentError(f"before the operator was asked: {'; '.join(report.reasons)}")
        self._feed(Event.LOWERED)
        around.progress.pause()
        since_s = time.monotonic()
        with around.stop.waiting():
            answer = around.prompter.ask(Prompt(action.text, action.cautions, self._confirmed(), action.connect))
        self._asked_s += time.monotonic() - since_s
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

    # Telling

    def _tell(self, reading: Reading) -> None:
        progress, schedule = self._around.progress, self._around.schedule
        self.flagged += bool(reading.flags)
        if reading.name != self._phase:
            self._phase = reading.name
            progress.phase(reading.name, "")
        elapsed_s = time.monotonic() - self._started_s - self._asked_s
        done = min(max(schedule.start_ns(reading.index) * 1e-9 / (schedule.duration_s or 1.0), 1e-9), 1.0)
        left_s, bench_left_s = elapsed_s * (1.0 - done) / done, schedule.duration_s * (1.0 - done)
        progress.reading(
            reading.index, len(schedule), reading.conditions, elapsed_s, left_s, bench_left_s, reading.flags
        )

    def _log(self, kind: str, text: str, **detail: Any) -> None:
        self._around.writer.log(Happening(kind, text, detail, self._around.clock.now_ns()))
