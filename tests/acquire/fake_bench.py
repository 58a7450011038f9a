"""A bench of plain objects: it counts exchanges, fails at any of them, and remembers what was done to the device.

Independent of drivers and of the simulated bench: it says only what a switch, a supply or a receiver does.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType
from typing import Any

import numpy as np

from benchrun.acquire.outputs import outputs_of
from benchrun.archive import Meta
from benchrun.bench import load_bench
from benchrun.contract.actions import Action, AskAction, ReadAction
from benchrun.contract.capture import Capture, WaveData
from benchrun.contract.reading import Reading
from benchrun.errors import InstrumentError, LinkError, NoAnswerError
from benchrun.visa.exchange import Exchange

BENCH, _problems = load_bench(Path(__file__).parents[2] / "recipes" / "balloon-driver.bench.yaml")
assert BENCH is not None
assert not _problems
OUTPUTS = outputs_of(BENCH)


class FakeClock:
    """Virtual or "real" time that moves only when it is waited on; `on_sleep` is called with each wait."""

    def __init__(self, virtual: bool = True) -> None:
        self.virtual = virtual
        self.ns = 0
        self.on_sleep: Callable[[float], None] = lambda _s: None

    def now_ns(self) -> int:
        return self.ns

    def sleep(self, duration_s: float) -> None:
        self.on_sleep(duration_s)
        self.ns += round(duration_s * 1e9)

    def align(self, start_ns: int) -> None:
        if self.virtual:
            self.ns = max(self.ns, start_ns)


@dataclass
class FakeSession:
    """The link of one fake instrument."""

    bench: FakeBench
    name: str
    exchanges: deque[Exchange] = field(default_factory=lambda: deque(maxlen=64))
    reopened: int = 0

    def say(self, what: str) -> None:
        """One exchange: counted, told to the story, and failing where that was planned."""
        bench, number = self.bench, self.bench.exchanges
        bench.exchanges += 1
        bench.clock.sleep(0.001)
        error: BaseException | None = None
        if self.name in bench.dead:
            error = NoAnswerError(f"{self.name}: did not answer '{what}' within 2 s")
        elif number in bench.faults:
            error = bench.faults[number](self, what)
        elif f"{self.name} {what}" in bench.words:
            error = bench.words.pop(f"{self.name} {what}")(self, what)
        self.exchanges.append(Exchange(bench.clock.ns, what, "" if error else "ok", str(error or "")))
        if error is not None:
            raise error
        bench.story.append(f"{self.name} {what}")

    def reopen(self) -> None:
        self.reopened += 1
        if self.name in self.bench.dead:
            raise LinkError(f"{self.name}: cannot be opened, nothing answers there")


class FakeInstrument:
    """What all fakes share."""

    settables: Mapping[str, Any] = MappingProxyType({})
    readables: Mapping[str, Any] = MappingProxyType({})

    def __init__(self, bench: FakeBench, name: str) -> None:
        self.bench, self.name = bench, name
        self.session = FakeSession(bench, name)

    def identify(self) -> Any:
        return None

    def prepare(self) -> None:
        self.session.say("prepare")

    def set(self, quantity: str, value: float) -> float:
        self.session.say(f"{quantity} {value:g}")
        return value

    def read(self, quantity: str) -> float:
        self.session.say(f"{quantity}?")
        return self.bench.scalars.get(f"{self.name}.{quantity}", 23.0)

    def make_safe(self) -> None:
        """Nothing to switch."""


class FakeSource(FakeInstrument):
    """Makes one signal. RF that changes frequency while it is on is remembered."""

    signal = "pump"

    def output(self, on: bool) -> None:
        self.session.say("rf on" if on else "rf off")
        (self.bench.rf.add if on else self.bench.rf.discard)(self.signal)
        self.bench.look()

    def set(self, quantity: str, value: float) -> float:
        if quantity == "frequency" and self.signal in self.bench.rf and self.bench.values.get(self.name) != value:
            self.bench.harm.append(f"{self.signal} hopped with RF on")
        stands = super().set(quantity, value)
        if quantity == "frequency":
            self.bench.values[self.name] = value
        return stands

    def locked(self) -> bool:
        self.session.say("locked?")
        return self.signal not in self.bench.unlocked

    def load_list(self, frequencies_hz: Sequence[float], levels_dbm: Sequence[float]) -> None:
        if self.signal in self.bench.rf:
            self.bench.harm.append(f"{self.signal} got a list with RF on")
        assert len(frequencies_hz) == len(levels_dbm)
        self.session.say(f"list of {len(frequencies_hz)} from {frequencies_hz[0]:g} at {levels_dbm[0]:g}")

    def leave_list(self) -> None:
        self.session.say("leave list")

    def make_safe(self) -> None:
        self.output(False)


class FakeReceiver(FakeSource):
    """An analyser: the probe, and waves that depend on which signals are on."""

    signal = "probe"
    load_list = None  # type: ignore[assignment]
    leave_list = None  # type: ignore[assignment]

    def __init__(self, bench: FakeBench, name: str) -> None:
        super().__init__(bench, name)
        self.capture: Capture | None = None

    def configure(self, capture: Capture) -> None:
        if capture == self.capture:
            return
        moves = len(capture.frequencies_hz) > 1 or self.bench.values.get(self.name) != capture.frequencies_hz[0]
        if moves and self.signal in self.bench.rf:
            self.bench.harm.append("the receiver's grid moved with RF on")
        self.session.say(f"configure {len(capture.frequencies_hz)} points from {capture.frequencies_hz[0]:g}")
        self.capture = capture
        self.bench.values[self.name] = capture.frequencies_hz[0]

    def acquire(self) -> WaveData:
        assert self.capture is not None
        self.session.say("sweep")
        self.bench.swept.append(frozenset(self.bench.rf))
        data = np.full(self.capture.shape, 1e-6 + 0j)
        for tone, name in enumerate(self.capture.tones):
            if name in self.bench.rf or name in self.bench.leaking:
                data[tone] = 0.1 + 0.01j * (1 + np.arange(data[tone].size).reshape(data[tone].shape))
        return self.bench.mangle(
            WaveData(data, tuple(name in self.bench.overdriven for name in self.capture.waves), True)
        )

    def make_safe(self) -> None:
        self.capture = None
        self.output(False)


class FakeSupply(FakeInstrument):
    """Gate and drain. A drain that is switched off falls over `fall_s`."""

    def __init__(self, bench: FakeBench, name: str) -> None:
        super().__init__(bench, name)
        self.on = {"gate": False, "drain": False}
        self.volts = {"gate": -5.0, "drain": 0.0}
        self.off_ns = -(10**15)

    def set(self, quantity: str, value: float) -> float:
        stands = super().set(quantity, value)
        bias, _, which = quantity.partition(".")
        if which == "voltage":
            self.volts[bias] = value
        self.bench.look()
        return stands

    def read(self, quantity: str) -> float:
        self.session.say(f"{quantity}?")
        bias, _, which = quantity.partition(".")
        if which == "voltage":
            return self.bench.drain_v if bias == "drain" else self.volts["gate"] * self.on["gate"]
        return 0.35 if self.on["drain"] else 0.0

    def output(self, bias: str, on: bool) -> None:
        self.session.say(f"{bias} {'on' if on else 'off'}")
        if bias == "drain" and self.on["drain"] and not on:
            self.off_ns = self.bench.clock.ns
        self.on[bias] = on
        self.bench.look()

    def tripped(self, bias: str) -> bool:
        self.session.say(f"{bias} tripped?")
        return bias in self.bench.tripped

    def program_trips(self, bias: str, **limits: Any) -> None:
        self.session.say(f"{bias} trips")


Fault = Callable[[FakeSession, str], BaseException]


class FakeBench:
    """The bench (acquire.opened.OpenBench), and what a test wants to know of it."""

    def __init__(self, clock: FakeClock | None = None, fall_s: float = 0.25) -> None:
        self.clock = clock or FakeClock()
        self.fall_s = fall_s
        self.exchanges = 0
        self.faults: dict[int, Fault] = {}
        self.words: dict[str, Fault] = {}
        self.dead: set[str] = set()
        self.story: list[str] = []
        self.harm: list[str] = []
        self.rf: set[str] = set()
        self.swept: list[frozenset[str]] = []
        self.unlocked: set[str] = set()
        self.leaking: set[str] = set()
        self.overdriven: set[str] = set()
        self.tripped: set[str] = set()
        self.scalars: dict[str, float] = {}
        self.values: dict[str, float] = {}
        self.mangle: Callable[[WaveData], WaveData] = lambda data: data
        self.supply_ = FakeSupply(self, "supply")
        self.receiver = FakeReceiver(self, "analyser")
        self.instruments: dict[str, Any] = {
            "pump": FakeSource(self, "pump"),
            "analyser": self.receiver,
            "meter": FakeInstrument(self, "meter"),
            "supply": self.supply_,
            "ambient": FakeInstrument(self, "ambient"),
        }
        self.sessions = {name: one.session for name, one in self.instruments.items()}

    @property
    def drain_v(self) -> float:
        """What stands at the drain: it falls evenly after it was switched off."""
        supply = self.supply_
        if supply.on["drain"]:
            return supply.volts["drain"]
        gone_s = (self.clock.ns - supply.off_ns) * 1e-9
        return max(0.0, supply.volts["drain"] * (1.0 - gone_s / self.fall_s)) if self.fall_s else 0.0

    @property
    def dark(self) -> bool:
        """Whether nothing radiates and the drain is down."""
        return not self.rf and self.drain_v < 1.0

    def look(self) -> None:
        """Remember what would have cost the device."""
        if not self.supply_.on["gate"] and self.drain_v >= 1.0:
            self.harm.append(f"gate released with the drain at {self.drain_v:.1f} V")
        if not self.supply_.on["gate"] and self.supply_.on["drain"] and self.rf:
            self.harm.append("driven without a gate")

    def prepare(self) -> None:
        for instrument in self.instruments.values():
            instrument.prepare()

    def signal(self, name: str) -> Any:
        return self.instruments[OUTPUTS.signals[name]]

    def supply(self, bias: str) -> Any:
        assert bias in ("gate", "drain")
        return self.supply_

    def set(self, target: str, value: float) -> float:
        first, _, quantity = target.partition(".")
        if first in OUTPUTS.signals:
            return float(self.signal(first).set(quantity, value))
        if first in OUTPUTS.bias_limits:
            return self.supply_.set(target, value)
        return float(self.instruments[first].set(quantity, value))

    def read(self, target: str) -> float:
        first, _, quantity = target.partition(".")
        return (
            self.supply_.read(target) if first in OUTPUTS.bias_limits else float(self.instruments[first].read(quantity))
        )


@dataclass(frozen=True)
class FakePlanned:
    """One action of a schedule."""

    action: Action
    conditions: dict[str, float | str]
    reading_index: int | None


@dataclass
class FakeSchedule:
    """A schedule from a list of actions; a reading every `slot_s`, the first after one."""

    actions: list[Action]
    slot_s: float = 1.0
    conditions: dict[int, dict[str, float | str]] = field(default_factory=dict)

    @property
    def prompts(self) -> int:
        return sum(isinstance(action, AskAction) for action in self.actions)

    @property
    def duration_s(self) -> float:
        return (len(self) + 1) * self.slot_s

    def __len__(self) -> int:
        return sum(isinstance(action, ReadAction) for action in self.actions)

    def start_ns(self, index: int) -> int:
        return round((index + 1) * self.slot_s * 1e9)

    def walk(self, start: int = 0) -> Iterator[FakePlanned]:
        index = 0
        for action in self.actions:
            if isinstance(action, ReadAction):
                if index >= start:
                    yield FakePlanned(action, self.conditions.get(index, {"index": float(index)}), index)
                index += 1
            else:
                yield FakePlanned(action, {}, None)


class MemoryWriter:
    """Keeps readings and events in lists; `fail_at` is the number of a commit that the disk refuses."""

    path = Path("memory/archive.sqlite")

    def __init__(self, on_commit: Callable[[], None] = lambda: None) -> None:
        self.committed: list[Reading] = []
        self.events: list[Any] = []
        self._on_commit = on_commit

    @property
    def readings(self) -> int:
        return len(self.committed)

    def commit(self, reading: Reading) -> None:
        self._on_commit()
        self.committed.append(reading)

    def log(self, event: Any) -> int:
        self.events.append(event)
        return len(self.events)

    def told(self, kind: str) -> list[Any]:
        return [event for event in self.events if event.kind == kind]


def capture(hz: float | Sequence[float] = 2.3e9, tones: Sequence[str] = ("probe", "pump"), **more: Any) -> Capture:
    """Return a capture of both waves at the probe and 7 MHz below it."""
    grid = (hz,) if isinstance(hz, float) else tuple(hz)
    return Capture(
        ("incident", "reflected"), tuple(tones), tuple(-7e6 * k for k in range(len(tones))), grid, 1e3, **more
    )


def meta(planned: int = 3) -> Meta:
    """Return a plausible account of a run."""
    return Meta(
        "run-1",
        "A run",
        "a.recipe.yaml",
        "a.bench.yaml",
        {"a.recipe.yaml": "benchrun: 1\n"},
        "0" * 64,
        planned,
        "simulated:1",
        1,
    )


def no_answer(session: FakeSession, what: str) -> BaseException:
    """One exchange without an answer."""
    return NoAnswerError(f"{session.name}: did not answer '{what}' within 2 s")


def dies(session: FakeSession, what: str) -> BaseException:
    """The instrument never answers again."""
    session.bench.dead.add(session.name)
    return no_answer(session, what)


def complains(session: FakeSession, what: str) -> BaseException:
    """The instrument reports an error."""
    return InstrumentError(f'{session.name}: reported -222,"Data out of range" after {what!r}')


def interrupts(session: FakeSession, what: str) -> BaseException:
    """Ctrl-C in the middle of the exchange."""
    return KeyboardInterrupt()


def our_defect(session: FakeSession, what: str) -> BaseException:
    """A driver with a mistake in it."""
    return ZeroDivisionError("division by zero")
