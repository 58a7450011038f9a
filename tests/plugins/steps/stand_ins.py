"""What the steps are tested against: a scope with values written down, and a device with a supply."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from benchrun.errors import InputError, InstrumentError
from benchrun.quantities import parse

KINDS = {"frequency": "frequency", "level": "level", "voltage": "voltage", "current-limit": "current", "drive": "level"}


@dataclass
class Scope:
    """A step's surroundings, written down."""

    conditions: dict[str, float] = field(default_factory=dict)
    words: dict[str, str] = field(default_factory=dict)
    signals: tuple[str, ...] = ("pump", "probe")
    receivers: tuple[str, ...] = ("incident", "reflected")
    if_bandwidth_hz: float = 300.0
    averages: int = 1
    following: tuple[str, ...] = ()

    def value(self, text: str | float, target: str) -> float:
        return parse(text, KINDS[target.rpartition(".")[2]])

    def levels_dbm(self, signal: str, frequencies_hz: Sequence[float]) -> tuple[float, ...]:
        """One level for all frequencies, less 1 dB for each GHz above the first."""
        level_dbm = self.conditions[f"{signal}.level"]
        return tuple(level_dbm - (hz - frequencies_hz[0]) * 1e-9 for hz in frequencies_hz)

    def text(self, text: str) -> str:
        return re.sub(r"\{(.*?)\}", lambda found: self.words[found[1]], text)

    def following_read(self) -> tuple[str, ...]:
        return self.following


class StillClock:
    """A clock that only counts what is slept."""

    virtual = True

    def __init__(self) -> None:
        self.slept_s = 0.0

    def now_ns(self) -> int:
        return round(self.slept_s * 1e9)

    def sleep(self, duration_s: float) -> None:
        self.slept_s += duration_s

    def align(self, start_ns: int) -> None:
        raise AssertionError("no step jumps in time")


class DeviceOnSupply:
    """BenchAccess to a square-law depletion device on a supply with two outputs. Everything said is kept in `log`."""

    def __init__(self, threshold_v: float = -3.3, amperes_per_v2: float = 1.4) -> None:
        self.clock = StillClock()
        self.log: list[tuple[object, ...]] = []
        self.said: list[str] = []
        self.volts = {"gate": 0.0, "drain": 0.0}
        self.on = {"gate": False, "drain": False}
        self.trips: dict[str, Mapping[str, object]] = {}
        self.trip_at_a = float("inf")
        self.stuck_v: dict[str, float] = {}
        self.fail_at: int | None = None
        self.damaged = ""
        self._threshold_v, self._slope = threshold_v, amperes_per_v2
        names = "voltage_low_v", "voltage_high_v", "current_limit_a", "over_voltage_v", "pinch_off_v"
        self._limits = {
            "gate": dict(zip(names, (-6.0, 0.0, 0.05, 7.0, -5.0), strict=True)),
            "drain": dict(zip(names[:4], (0.0, 30.0, 3.0, 32.0), strict=True)),
        }

    def terminal_v(self, bias: str) -> float:
        return self.stuck_v.get(bias, self.volts[bias] if self.on[bias] else 0.0)

    def drain_a(self) -> float:
        overdrive = max(self.terminal_v("gate") - self._threshold_v, 0.0)
        return self._slope * overdrive**2 if self.terminal_v("drain") > 0.5 else 0.0

    def _did(self, *what: object) -> None:
        self.log.append(what)
        if self.fail_at is not None and len(self.log) > self.fail_at:
            raise InstrumentError(f"supply: exchange {len(self.log)} failed")
        if self.terminal_v("drain") > 0.5 and self.terminal_v("gate") > -2.0:
            self.damaged = f"gate at {self.terminal_v('gate')} V under drain after {what}"

    # BenchAccess

    def set(self, target: str, value: float) -> float:
        bias, _, quantity = target.partition(".")
        assert quantity == "voltage"
        self.volts[bias] = value
        self._did("set", target, value)
        return value

    def read(self, target: str) -> float:
        self._did("read", target)
        bias, _, quantity = target.partition(".")
        return self.terminal_v(bias) if quantity == "voltage" else self.drain_a()

    def supply(self, bias: str) -> DeviceOnSupply:
        assert bias in self.volts
        return self

    def bias_limits(self, bias: str) -> Mapping[str, float]:
        return self._limits[bias]

    def say(self, text: str) -> None:
        self.said.append(text)

    # DcSupply

    def program_trips(self, bias: str, *, current_limit_a: float, over_voltage_v: float, over_current: bool) -> None:
        self.trips[bias] = {"current": current_limit_a, "voltage": over_voltage_v, "over_current": over_current}
        self._did("trips", bias)

    def output(self, bias: str, on: bool) -> None:
        self.on[bias] = on
        self._did("output", bias, on)

    def tripped(self, bias: str) -> bool:
        self._did("tripped", bias)
        return bias == "drain" and self.drain_a() > self.trip_at_a


__all__ = ["DeviceOnSupply", "InputError", "Scope", "StillClock"]
