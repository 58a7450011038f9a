"""The simulated worlds that a command opened, and the judge of what became of them."""

from __future__ import annotations

import copy
from collections.abc import Callable, Mapping
from typing import Any

import benchrun_sim
from benchrun_sim.in_process import InProcessRehearsal

#: A drain at or below this voltage (V) hurts nobody any more.
RELEASED_V = 1.0


class Worlds:
    """Stands where the simulated bench's entry point stands, and keeps every world that the product opens.

    `wired` changes what a world is told, where it is to differ from the bench file; `arm` is called with each world
    before the product gets it: it plans the faults.
    """

    def __init__(self) -> None:
        self.opened: list[InProcessRehearsal] = []
        self.wired: Callable[[dict[str, Any]], object] = lambda _wiring: None
        self.arm: Callable[[InProcessRehearsal], None] = lambda _world: None

    def open_in_process(self, wiring: Mapping[str, Any], *, seed: int, real_time: bool = False) -> InProcessRehearsal:
        told = copy.deepcopy(dict(wiring))
        self.wired(told)
        world = benchrun_sim.open_in_process(told, seed=seed, real_time=real_time)
        self.opened.append(world)
        self.arm(world)
        return world

    open_channel = staticmethod(benchrun_sim.open_channel)
    serve = staticmethod(benchrun_sim.serve)

    @property
    def last(self) -> InProcessRehearsal:
        return self.opened[-1]

    @property
    def untouched(self) -> bool:
        """Whether no message ever came to an instrument."""
        return all(world.faults.exchanges == 0 for world in self.opened)


def watch(world: InProcessRehearsal, said: list[tuple[str, str]]) -> None:
    """Keep every message that is executed in a world as (instrument, text), in order: exchange n is said[n - 1]."""
    for name, instrument in world.rack.instruments.items():
        instrument.execute = _watched(name, instrument.execute, said)  # type: ignore[method-assign]


def _watched(name: str, execute: Callable[[str], bytes], said: list[tuple[str, str]]) -> Callable[[str], bytes]:
    def execute_watched(message: str) -> bytes:
        said.append((name, message))
        return execute(message)

    return execute_watched


def events(world: InProcessRehearsal) -> list[str]:
    """Return what happened in a world, in its own words and order."""
    return [event.event for event in world.rack.world.record]


def radiating(world: InProcessRehearsal) -> list[str]:
    """Return the instruments whose RF is on now."""
    return [name for name in world.rack.instruments if world.rack.world.source(name).on]


def drain_v(world: InProcessRehearsal) -> float:
    """Return what is at the drain now."""
    return float(world.rack.world.supplies.bias("drain").at(world.rack.world.now_ns))


def complaints(world: InProcessRehearsal) -> list[str]:
    """Return everything that is wrong with how a world was left; [] where nobody and nothing came to harm.

    Judged by the world's own record: nothing damaged, no RF, no drain, and the gate not released before the drain.
    """
    own = world.rack.world
    found = [f"damage: {damage}" for damage in own.damage]
    found += [f"{name} still radiates" for name in radiating(world)]
    if own.supplies.bias("drain").on or drain_v(world) > RELEASED_V:
        found.append(f"the drain is at {drain_v(world):.1f} V")
    happened = [event.split(" ")[0:2] for event in events(world) if event.startswith(("gate o", "drain o"))]
    drain_up = False
    for name, what in happened:
        if name == "drain":
            drain_up = what == "on"
        elif what == "off" and drain_up:
            found.append("the gate went off before the drain")
    return found
