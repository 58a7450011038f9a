"""The simulated bench as its connections see it: one world, its instruments, one lock, and the virtual clock."""

from __future__ import annotations

import threading
import time
from collections import Counter
from collections.abc import Callable, Mapping
from typing import Any

from .faults import FaultInjector
from .instruments import BY_ROLE
from .scpi_instrument import Instrument
from .world import World


class Rack:
    """World and instruments of a wiring document. Whoever touches it holds `lock`.

    Raises ValueError for a role that no simulated instrument has.
    """

    def __init__(self, wiring: Mapping[str, Any], *, seed: int, real_time: bool = False) -> None:
        self.wiring = wiring
        self.seed = seed
        self.real_time = real_time
        self.lock = threading.RLock()
        self.faults = FaultInjector()
        self.boots: Counter[str] = Counter()
        self.listeners: set[Callable[[], None]] = set()
        self.restart()

    def restart(self) -> None:
        """Start anew at time 0: another world of the same seed, every instrument as after switching on."""
        self.world = World(self.wiring, self.seed)
        self.faults.restart()
        self.instruments: dict[str, Instrument] = {}
        for name in self.wiring["instruments"]:
            self.instruments[name] = _instrument(name, self.wiring, self)

    @property
    def addresses(self) -> dict[str, str]:
        """Resource string of each instrument that the wiring gives one."""
        return {
            name: str(instrument["address"])
            for name, instrument in self.wiring["instruments"].items()
            if instrument.get("address")
        }

    def advance(self, duration_ns: int) -> None:
        """Let virtual time pass; in real time, wait for it as well."""
        self.world.advance(duration_ns)
        if self.real_time:
            time.sleep(duration_ns * 1e-9)

    def disturb(self) -> None:
        """Let every instrument see that RF has changed: a supply's protection may trip."""
        for instrument in self.instruments.values():
            instrument.disturbed()

    def pulse(self, count: int) -> dict[str, tuple[tuple[float, ...], tuple[float, ...]]]:
        """Send trigger pulses to every source that waits for them."""
        followers = {}
        for name, instrument in self.instruments.items():
            follow = getattr(instrument, "follow", None)
            steps = follow(count) if follow is not None else None
            if steps is not None:
                followers[name] = steps
        return followers

    def connect(self, plane: str, what: str) -> None:
        """Do what the operator is asked to do."""
        with self.lock:
            self.world.connect(plane, what)
            self.disturb()

    def power_cycle(self, name: str) -> None:
        """Switch an instrument off and on: its settings are those of its preset, its links are broken."""
        self.boots[name] += 1
        self.instruments[name].power_on()

    def notice(self) -> None:
        """Let the connections that wait for service requests look for one."""
        for listener in tuple(self.listeners):
            listener()


def _instrument(name: str, wiring: Mapping[str, Any], rack: Rack) -> Instrument:
    told = dict(wiring["instruments"][name])
    role = told.get("role")
    if role not in BY_ROLE:
        raise ValueError(
            f"instrument {name}: no simulated instrument has the role {role!r}; there are {', '.join(BY_ROLE)}"
        )
    told["wired_receivers"] = list(
        dict.fromkeys(r["receiver"] for r in wiring.get("receivers", {}).values() if r["instrument"] == name)
    )
    return BY_ROLE[role](name, told, rack)


class VirtualClock:
    """Bench time of a rehearsal in this process."""

    virtual = True

    def __init__(self, rack: Rack) -> None:
        self._rack = rack

    def now_ns(self) -> int:
        """Virtual time in nanoseconds since the run's start."""
        return int(self._rack.world.now_ns)

    def sleep(self, duration_s: float) -> None:
        """Let bench time pass. Raises ValueError for a negative duration."""
        if not 0.0 <= duration_s < 1e9:
            raise ValueError(f"cannot sleep {duration_s} s")
        self.sleep_ns(round(duration_s * 1e9))

    def sleep_ns(self, duration_ns: int) -> None:
        """Let a whole number of nanoseconds pass."""
        with self._rack.lock:
            self._rack.advance(duration_ns)
            self._rack.notice()

    def align(self, start_ns: int) -> None:
        """Jump to `start_ns` if it is still to come. The jump takes no real time, even where time is real."""
        with self._rack.lock:
            if start_ns > self._rack.world.now_ns:
                self._rack.world.advance(start_ns - self._rack.world.now_ns)
                self._rack.notice()
