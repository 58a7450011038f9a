"""The dc supplies: what stands at their terminals, and since when."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

GATE, DRAIN = "gate", "drain"
_NEVER_NS = -(10**18)


@dataclass(slots=True)
class Channel:
    """One channel of a supply. A drain discharges slowly through its capacitors; a gate follows at once."""

    decay_s: float = 0.0
    voltage_v: float = 0.0
    current_limit_a: float = 0.0
    on: bool = False
    _from_v: float = field(default=0.0, repr=False)
    _since_ns: int = field(default=_NEVER_NS, repr=False)

    @property
    def target_v(self) -> float:
        """Voltage that the terminals go to."""
        return self.voltage_v if self.on else 0.0

    def set(self, now_ns: int, voltage_v: float, current_limit_a: float, on: bool) -> None:
        """Change the setting at a time."""
        self._from_v = self.at(now_ns)
        self._since_ns = now_ns
        self.voltage_v, self.current_limit_a, self.on = voltage_v, current_limit_a, on

    def at(self, now_ns: int) -> float:
        """Voltage at the terminals: up at once, down with the capacitors."""
        target_v = self.target_v
        if self.decay_s == 0.0 or abs(target_v) >= abs(self._from_v):
            return target_v
        passed_s = (now_ns - self._since_ns) * 1e-9
        if passed_s > 40.0 * self.decay_s:
            return target_v
        return target_v + (self._from_v - target_v) * math.exp(-passed_s / self.decay_s)


class Supplies:
    """All channels of the bench, those that bias the device by the names gate and drain."""

    def __init__(self, wiring: Mapping[str, Any], constants: Mapping[str, Any]) -> None:
        self._places = {name: (spec["instrument"], spec["channel"]) for name, spec in wiring.get("bias", {}).items()}
        self._channels: dict[tuple[str, int], Channel] = {}
        for name, place in self._places.items():
            self._channels[place] = Channel(decay_s=constants["supply"]["drain_decay_s"] if name == DRAIN else 0.0)

    def channel(self, instrument: str, number: int) -> Channel:
        """Return a channel; one that biases nothing exists as well."""
        return self._channels.setdefault((instrument, number), Channel())

    def name_of(self, instrument: str, number: int) -> str:
        """Bias that a channel feeds, or its own place."""
        for name, place in self._places.items():
            if place == (instrument, number):
                return str(name)
        return f"{instrument} channel {number}"

    def bias(self, name: str) -> Channel:
        """Return the channel behind a bias; one that is off where the bench has none."""
        return self.channel(*self._places[name]) if name in self._places else Channel()
