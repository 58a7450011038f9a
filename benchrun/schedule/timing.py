"""How long a schedule takes, by a model of what each action costs; and when each reading starts.

The timetable is an upper estimate by a little: a reading waits for its start where time is virtual, so every reading
of a rehearsal starts at its time exactly, resumed or not. All numbers of the model stand in `Timing`.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

from benchrun.bench import Bench
from benchrun.contract.actions import Action, ProcedureAction, ReadAction, SetAction, SettleAction
from benchrun.contract.capture import Capture
from benchrun.contract.hooks import StepSpec
from benchrun.schedule.program import Node, StepNode, SweepNode
from benchrun.schedule.scope import Scope
from benchrun.schedule.state import State

NS = 1_000_000_000


@dataclass(frozen=True, slots=True)
class Timing:
    """Times in s. The defaults are those of the simulated instruments; a real bench is slower by its instruments."""

    message_s: float = 0.001
    """One message and its answer."""
    source_s: float = 0.002
    """A source's frequency or level takes effect."""
    output_s: float = 0.001
    """A supply's setting takes effect."""
    filter_periods: float = 1.2
    """A point of a sweep, in periods of the IF bandwidth."""
    point_s: float = 0.0002
    """Overhead of a point."""
    power_s: float = 0.020
    """A reading of a power meter."""
    supply_s: float = 0.005
    """A reading of a supply."""
    temperature_s: float = 0.010
    """A reading of a thermometer."""
    operator_s: float = 60.0
    """An operator's action."""
    procedure_s: float = 5.0
    """A procedure that does not say how long it takes."""
    lowering_s: float = 0.5
    """Making RF and drain safe before the operator is asked."""
    list_s: float = 0.018
    """A source leaves its list, is given a new one, and waits for trigger pulses."""
    spare_s: float = 0.001
    """What a reading starts later than it could, so that it is never late."""
    spare_db: float = 0.5
    """How much more a level may rise than in the round that was timed, in steps of the ramp."""


class ActionTimes:
    """Times (ns) of actions one after the other: it remembers which signals are on and what the receiver is set to."""

    def __init__(self, bench: Bench, timing: Timing, steps: Mapping[str, StepSpec]) -> None:
        self._bench, self._timing, self._steps = bench, timing, steps
        self._on: frozenset[str] = frozenset()
        self._set_up: Capture | None = None
        self._levels: dict[str, float] = {}
        self._biased = False
        self._coherent = bench.coherent
        self._drains = [name for name, bias in bench.bias.items() if bias.released_below is not None]

    def before_ns(self, action: Action) -> int:
        """Return the time from the action's beginning until its reading starts: RF, receiver and reference."""
        if not isinstance(action, ReadAction):
            return 0
        messages = self._switch(action.signals) + len(action.signals)
        listed_s = 0.0
        if action.capture is not None and _but_for_its_point(action.capture) != self._set_up:
            messages += 1
            listed_s = self._timing.list_s * action.capture.follow
            self._set_up = _but_for_its_point(action.capture)
        return round((messages * self._timing.message_s + listed_s + self._timing.spare_s) * NS)

    def after_ns(self, action: Action) -> int:
        """Return the rest of the action's time."""
        if isinstance(action, ReadAction):
            return round(self._reading_s(action) * NS)
        if isinstance(action, SetAction):
            return round(sum(self._set_s(name, value) for name, value in self._with_blanking(action)) * NS)
        if isinstance(action, SettleAction):
            return round((self._switch(action.signals) * self._timing.message_s + action.duration_s) * NS)
        self._biased = isinstance(action, ProcedureAction)
        if isinstance(action, ProcedureAction):
            return round((self._dark_s() + self._procedure_s(action)) * NS)
        return round((self._dark_s() + self._timing.operator_s + self._timing.lowering_s) * NS)

    def _switch(self, signals: Sequence[str]) -> int:
        """Return how many messages it takes to have exactly these signals on."""
        wanted = frozenset(signals)
        messages = len(self._on - wanted) + sum(self._switching_on(name) for name in wanted - self._on)
        self._on = wanted
        return messages

    def _switching_on(self, signal: str) -> int:
        """Return how many messages switch a signal on: a source's frequency and level are read back before."""
        return 2 if self._bench.role(self._bench.signals[signal].instrument) == "signal-source" else 1

    def _dark_s(self) -> float:
        return self._switch(()) * self._timing.message_s

    def _with_blanking(self, action: SetAction) -> Iterator[tuple[str, float]]:
        for name, value in action.values:
            signal, _, quantity = name.partition(".")
            if quantity == "frequency" and signal in self._on:
                yield "", 1.0 + self._switching_on(signal)
            yield name, value

    def _set_s(self, name: str, value: float) -> float:
        timing = self._timing
        signal, _, quantity = name.partition(".")
        if not name:
            return value * timing.message_s
        if signal in self._bench.signals:
            return self._level_s(name, value, signal) if quantity == "level" else timing.message_s + timing.source_s
        return timing.message_s + (timing.output_s if signal in self._bench.bias else 0.0)

    def _level_s(self, name: str, level_dbm: float, signal: str) -> float:
        """Return how long a level takes: it rises by the ramp, the first time from what is asked for."""
        instrument, timing = self._bench.instruments[self._bench.signals[signal].instrument], self._timing
        port = instrument.source_port
        first = self._levels.get(name) is None
        before = self._levels.get(name, level_dbm if port is None else port.power_up)
        self._levels[name] = level_dbm
        rise_db = level_dbm - before + timing.spare_db
        steps = 1 if instrument.ramp is None or level_dbm <= before else math.ceil(rise_db / instrument.ramp)
        return first * timing.message_s + steps * (timing.message_s + timing.source_s)

    def _reading_s(self, action: ReadAction) -> float:
        found_s = sum(self._scalar_s(name) for name in action.scalars)
        found_s += self._timing.message_s * len(self._drains) * self._biased
        return found_s if action.capture is None else found_s + self._sweep_s(action.capture)

    def _sweep_s(self, capture: Capture) -> float:
        timing = self._timing
        tunings = 1 if self._coherent else len(capture.tones)
        point_s = timing.filter_periods / capture.if_bandwidth_hz + timing.point_s
        return 2.0 * timing.message_s + len(capture.frequencies_hz) * capture.averages * tunings * point_s

    def _scalar_s(self, name: str) -> float:
        first = name.partition(".")[0]
        role = "dc-supply" if first in self._bench.bias else self._bench.role(first)
        timing = self._timing
        taken = {"dc-supply": timing.supply_s, "power-meter": timing.power_s, "thermometer": timing.temperature_s}
        return timing.message_s + taken.get(role, 0.0)

    def _procedure_s(self, action: ProcedureAction) -> float:
        spec = self._steps.get(action.step)
        known = spec.duration_s if spec is not None else None
        return self._timing.procedure_s if known is None else known(action.parameters)


def _but_for_its_point(capture: Capture) -> Capture:
    """Return what the receiver is set up for beside its one frequency, which is set with the source's."""
    return replace(capture, frequencies_hz=(0.0,)) if len(capture.frequencies_hz) == 1 else capture


# The timetable: each list of the program with the times of its steps. A sweep has two: for its first round, where much
# is set for the first time, and for each later one.


@dataclass(frozen=True, slots=True)
class _TimedStep:
    duration_ns: int
    starts_ns: tuple[int, ...]

    @property
    def readings(self) -> int:
        return len(self.starts_ns)

    def start_ns(self, index: int) -> int:
        return self.starts_ns[index]


@dataclass(frozen=True, slots=True)
class _TimedList:
    parts: tuple[_TimedStep | _TimedSweep, ...]
    lead_ns: int = 0

    @property
    def duration_ns(self) -> int:
        return self.lead_ns + sum(part.duration_ns for part in self.parts)

    def start_ns(self, index: int) -> int:
        at_ns = self.lead_ns
        for part in self.parts:
            if index < part.readings:
                return at_ns + part.start_ns(index)
            index -= part.readings
            at_ns += part.duration_ns
        return at_ns


@dataclass(frozen=True, slots=True)
class _TimedSweep:
    first: _TimedList
    later: _TimedList
    rounds: int
    each: int
    first_ns: int
    later_ns: int

    @property
    def readings(self) -> int:
        return self.rounds * self.each

    @property
    def duration_ns(self) -> int:
        return self.first_ns + (self.rounds - 1) * self.later_ns

    def start_ns(self, index: int) -> int:
        k, index = divmod(index, self.each)
        if k == 0:
            return self.first.start_ns(index)
        return self.first_ns + (k - 1) * self.later_ns + self.later.start_ns(index)


class Timetable:
    """When each reading starts and when all is over, in ns; from the first two rounds of every sweep."""

    def __init__(self, body: Sequence[Node], new_state: Callable[[], State], scope: Scope, times: ActionTimes) -> None:
        self._state, self._scope, self._times = new_state(), scope, times
        scope.stand(self._state.values, self._state.words)
        self._whole = self._list(body)

    @property
    def duration_ns(self) -> int:
        """Time of the whole schedule."""
        return self._whole.duration_ns

    def start_ns(self, index: int) -> int:
        """Return when a reading starts; one past the last: when all readings and what follows them are over."""
        return self._whole.start_ns(index)

    def _list(self, body: Sequence[Node], lead_ns: int = 0) -> _TimedList:
        return _TimedList(tuple(self._sweep(n) if isinstance(n, SweepNode) else self._step(n) for n in body), lead_ns)

    def _step(self, node: StepNode) -> _TimedStep:
        at_ns, starts = 0, []
        self._scope.begin(node.following)
        for planned in self._scope.actions(node):
            action = self._state.apply(planned)
            if action is not None:
                at_ns += self._times.before_ns(action)
                if isinstance(action, ReadAction):
                    starts.append(at_ns)
                at_ns += self._times.after_ns(action)
        return _TimedStep(at_ns, tuple(starts))

    def _sweep(self, node: SweepNode) -> _TimedSweep:
        rounds = len(node.axis)
        first = self._round(node, 0)
        later = self._round(node, 1) if rounds > 1 else first
        if rounds > 2:
            self._pass_round(node, rounds - 1)
        if not node.axis.settable:
            self._state.leave(node.axis.name)
        return _TimedSweep(first, later, rounds, node.each, first.duration_ns, later.duration_ns)

    def _round(self, node: SweepNode, k: int) -> _TimedList:
        action = self._begin(node, k)
        return self._list(node.body, 0 if action is None else self._times.after_ns(action))

    def _begin(self, node: SweepNode, k: int) -> Action | None:
        value = node.axis.values[k]
        if node.axis.settable and not isinstance(value, str):
            return self._state.apply(SetAction(((node.axis.name, value),)))
        self._state.put(node.axis.name, value)
        return None

    def _pass_round(self, node: SweepNode, k: int) -> None:
        self._pass(self._begin(node, k))
        for inner in node.body:
            if isinstance(inner, SweepNode):
                self._pass_round(inner, len(inner.axis) - 1)
                if not inner.axis.settable:
                    self._state.leave(inner.axis.name)
            else:
                self._scope.begin(inner.following)
                for planned in self._scope.actions(inner):
                    self._pass(self._state.apply(planned))

    def _pass(self, action: Action | None) -> None:
        """Let an action count for what comes after it, and not for its time."""
        if action is not None:
            self._times.before_ns(action)
            self._times.after_ns(action)
