"""Damage: who gets more than it bears, or is handled while live. Recorded, loudly; nothing stops working for it."""

from __future__ import annotations

import logging
from collections.abc import Iterator, Mapping
from typing import Any, NamedTuple

from .bench_state import DEVICE, INPUT, OUTPUT, Bench, DeviceState, PlaneWaves, Tone
from .device import Bias
from .levels import ComplexArray, dbm
from .overloads import Overload, above, along_feed, from_plane
from .supplies import DRAIN, GATE, Supplies

_LOG = logging.getLogger("benchrun_sim.world")
# RF above this, or a drain above this, at a connector that is opened or closed is recorded as a hazard.
_HAZARD_DBM = 0.0
_HAZARD_V = 1.0
# Power into an empty connector that a biased device is taken to survive.
_OPEN_OUTPUT_DBM = 20.0


class Damage(NamedTuple):
    """Something that would have been destroyed, or would have hurt somebody, on a real bench."""

    ns: int
    item: str
    what: str
    value: float
    limit: float


class Inspector:
    """Watches levels, bias and hands."""

    def __init__(
        self, wiring: Mapping[str, Any], constants: Mapping[str, Any], bench: Bench, supplies: Supplies
    ) -> None:
        self._wiring, self._own, self._bench, self._supplies = wiring, constants["device"], bench, supplies
        self._released_v = wiring.get("bias", {}).get(DRAIN, {}).get("released_below_v", 1.0)
        self._sensors = {
            name: spec.get("sensor", {}).get("damage_dbm")
            for name, spec in wiring["instruments"].items()
            if spec["role"] == "power-meter"
        }
        self._worst: dict[tuple[str, str], float] = {}
        self.damage: list[Damage] = []

    def _harm(self, now_ns: int, found: Overload) -> None:
        """Record damage; the same again only when it gets worse."""
        worst = self._worst.get((found.item, found.what))
        if worst is not None and abs(found.value) < abs(worst) + 0.5:
            return
        self._worst[found.item, found.what] = found.value
        self.damage.append(Damage(now_ns, *found))
        _LOG.critical("DAMAGE at %.6f s: %s: %s %.2f, limit %.2f", now_ns * 1e-9, *found)

    def bias(self, now_ns: int, bias: Bias) -> None:
        """Look at the supplies after a change."""
        drain, gate = self._supplies.bias(DRAIN), self._supplies.bias(GATE)
        if bias.drain_v > self._released_v and not gate.on:
            self._harm(now_ns, Overload("device", "gate released under drain voltage", bias.drain_v, self._released_v))
        current_a = min(bias.quiescent_a, drain.current_limit_a) if drain.on else 0.0
        checks = [
            *above("device", "drain voltage", bias.drain_v, self._own["drain_maximum_v"]),
            *above("device", "drain current", current_a, self._own["drain_maximum_a"]),
            *above("device", "gate voltage", gate.target_v, self._own["gate_maximum_v"]),
        ]
        if gate.target_v < self._own["gate_minimum_v"]:
            checks.append(Overload("device", "gate voltage", gate.target_v, self._own["gate_minimum_v"]))
        for found in checks:
            self._harm(now_ns, found)

    def hands(self, now_ns: int, plane: str, pump: Tone, probe: Tone) -> None:
        """Somebody opens and closes a connector: RF must be off and the drain down."""
        in_place = self._bench.connected[plane] == DEVICE
        reaches_here = [(side, tone) for side, tone in ((INPUT, pump), (OUTPUT, probe)) if in_place or side == plane]
        for side, tone in reaches_here:
            level_dbm = highest_dbm(self._bench.source_wave(side, tone)[None, :])
            for found in above("operator", f"connector at {plane} handled under RF", level_dbm, _HAZARD_DBM):
                self._harm(now_ns, found)
        drain_v = self._supplies.bias(DRAIN).at(now_ns)
        if in_place and drain_v > _HAZARD_V:
            self._harm(
                now_ns, Overload("operator", f"connector at {plane} handled under drain voltage", drain_v, _HAZARD_V)
            )

    def waves(self, now_ns: int, planes: Mapping[str, PlaneWaves], pump: Tone, probe: Tone) -> None:
        """Look at the levels everywhere."""
        for found in self._overloads(planes, pump, probe):
            self._harm(now_ns, found)

    def _overloads(self, planes: Mapping[str, PlaneWaves], pump: Tone, probe: Tone) -> Iterator[Overload]:
        for plane, source in ((INPUT, pump), (OUTPUT, probe)):
            side = self._bench.sides[plane]
            if source.on:
                yield from along_feed(side, source.frequency_hz, source.level_dbm)
            if plane in planes:
                toward_dbm, away_dbm = highest_dbm(planes[plane].a), highest_dbm(planes[plane].b)
                yield from from_plane(side, toward_dbm, away_dbm, probe.frequency_hz, self._wiring["instruments"])
                yield from self._at_plane(plane, toward_dbm, away_dbm)

    def _at_plane(self, plane: str, toward_dbm: float, away_dbm: float) -> Iterator[Overload]:
        """Overloads of what is connected to a plane."""
        limits, what = self._wiring.get("device", {}), self._bench.connected[plane]
        if what in self._sensors:
            yield from above(what, "input level", toward_dbm, self._sensors[what])
        elif what == DEVICE and plane == INPUT:
            yield from above("device", "input level", toward_dbm, limits.get("maximum_input_dbm"))
        elif what == DEVICE:
            yield from above("device", "output level", away_dbm, limits.get("maximum_output_dbm"))

    def open_output(self, now_ns: int, output_dbm: float, state: DeviceState) -> None:
        """Look at a device that is driven while nothing is connected to its output."""
        if state.bias.activity > 0.05 and self._bench.connected[INPUT] == DEVICE != self._bench.connected[OUTPUT]:
            for found in above("device", "driven into an open output", output_dbm, _OPEN_OUTPUT_DBM):
                self._harm(now_ns, found)


def highest_dbm(waves: ComplexArray) -> float:
    """Highest total power of the tones (first axis) over the points (last axis)."""
    return dbm(float((waves.real**2 + waves.imag**2).sum(axis=0).max()))
