"""The one world that all simulated instruments share: settings in, readings out, time only when somebody lets it pass."""

from __future__ import annotations

import logging
from collections.abc import Mapping, Sequence
from typing import Any, NamedTuple

import numpy as np

from .bench_state import DEVICE, INPUT, OUTPUT, Bench, DeviceState, PlaneWaves, SourceSetting, Tone
from .imperfections import Imperfections
from .keyed import Key, normal, stream
from .levels import BoolArray, ComplexArray, FloatArray, dbm, power_ratio
from .operating import Carrier
from .overloads import Overload, along_feed, from_plane
from .receivers import IMAGE, PROBE, PUMP, Filter, Incoming, Receivers, ambient_k
from .reference import overlaid, reference_world
from .supplies import DRAIN, GATE, Supplies
from .thermal import Stage, Thermal
from .truth import Truth

_LOG = logging.getLogger("benchrun_sim.world")
# The device's behaviour is worked out on this grid of temperature rises: 0.00004 dB of gain apart.
_RISE_GRID_K = 0.002
_DISSIPATION_GRID_K = 0.05
# RF above this at a connector that is opened or closed is recorded as a hazard.
_HAZARD_DBM = 0.0

Follow = Mapping[str, tuple[Sequence[float], Sequence[float]]]


class Event(NamedTuple):
    """Something that happened on the bench, at a virtual time."""

    ns: int
    event: str


class Damage(NamedTuple):
    """Something that would have been destroyed, or would have hurt somebody, on a real bench."""

    ns: int
    item: str
    what: str
    value: float
    limit: float


class World:
    """The bench of a wiring document (see DEVELOPERS.md), with a seed for everything that differs from bench to bench.

    `wiring["rehearsal"]` names the reference world, switches imperfections off (see `Imperfections`) and may replace constants:
    {"world": "R1", "noise": false, "device": {"gain_db": 15.0}}. Raises ValueError for a name that the world does not have.
    """

    def __init__(self, wiring: Mapping[str, Any], seed: int) -> None:
        rehearsal = dict(wiring.get("rehearsal", {}))
        self.imperfections = Imperfections.of(rehearsal)
        changes = {
            name: value for name, value in rehearsal.items() if name != "world" and name not in Imperfections.names()
        }
        self.constants = overlaid(reference_world(rehearsal.get("world", "R1")), changes)
        if not self.imperfections.repeatability:
            self.constants["connection_repeatability"] = 0.0
        self.wiring, self.seed = wiring, seed
        self.bench = Bench(wiring, self.constants, seed, self.imperfections)
        self.supplies = Supplies(wiring, self.constants)
        own = self.constants["device"]
        self.thermal = Thermal(
            [Stage(**stage) for stage in own["thermal"]], self._dissipated_w, memory=self.imperfections.thermal_memory
        )
        self.damage: list[Damage] = []
        self.record: list[Event] = []
        self.truth = Truth(self)
        self._now_ns = 0
        self._sources: dict[str, SourceSetting] = {}
        self._receivers: dict[str, Receivers] = {}
        self._worst: dict[tuple[str, str], float] = {}

    # Time ---------------------------------------------------------------------------------------------------------------

    @property
    def now_ns(self) -> int:
        """Virtual time since the world began, in ns."""
        return self._now_ns

    def advance(self, duration_ns: int) -> None:
        """Let time pass; the device warms up or cools down meanwhile. Raises ValueError for a negative duration."""
        if duration_ns < 0:
            raise ValueError(f"time does not run backwards ({duration_ns} ns)")
        self._now_ns += duration_ns

    # Settings -----------------------------------------------------------------------------------------------------------

    def set_source(self, instrument: str, *, frequency_hz: float, level_dbm: float, on: bool) -> None:
        """Set a generator, or the analyser's own source, to a frequency and a level at its output, RF on or off."""
        before = self._sources.get(instrument, SourceSetting())
        after = SourceSetting(float(frequency_hz), float(level_dbm), bool(on))
        if after == before:
            return
        self.thermal.settle(self._now_ns)
        self._sources[instrument] = after
        if after.on != before.on:
            self._note(f"rf-on {instrument} {level_dbm:.2f} dBm" if on else f"rf-off {instrument}")
        elif on and after.level_dbm != before.level_dbm:
            self._note(f"level {instrument} {level_dbm:.2f} dBm")
        self._inspect_rf()

    def set_supply(
        self, instrument: str, channel: int, *, voltage_v: float, current_limit_a: float, on: bool
    ) -> None:
        """Set one channel of a dc supply."""
        place, name = self.supplies.channel(instrument, channel), self.supplies.name_of(instrument, channel)
        if (place.voltage_v, place.current_limit_a, place.on) == (voltage_v, current_limit_a, on):
            return
        self.thermal.settle(self._now_ns)
        was_on, was_v = place.on, place.voltage_v
        place.set(self._now_ns, float(voltage_v), float(current_limit_a), bool(on))
        if on != was_on:
            self._note(f"{name} on {voltage_v:.3f} V" if on else f"{name} off")
        elif on and voltage_v != was_v:
            self._note(f"{name} set {voltage_v:.3f} V")
        self._inspect_bias()
        self._inspect_rf()

    def connect(self, plane: str, what: str) -> None:
        """Connect a standard, "meter", "device" or "nothing" to a plane: each time a new mating.

        Raises ValueError for a plane or a thing that is not there.
        """
        if plane not in self.bench.sides:
            raise ValueError(f"there is no plane {plane!r}; there is: {', '.join(self.bench.sides)}")
        if what != DEVICE:
            self.bench.standards.reflection(what, np.array([self.constants["centre_hz"]]))
        self._inspect_hands(plane)
        self.thermal.settle(self._now_ns)
        self.bench.connected[plane] = what
        self.bench.matings[plane] += 1
        self._note(f"connect {plane} {what}")
        self._inspect_rf()

    # Readings -----------------------------------------------------------------------------------------------------------

    def supply_reading(self, instrument: str, channel: int) -> tuple[float, float]:
        """Voltage in V and current in A, as the supply itself reads them at its terminals."""
        place, name = self.supplies.channel(instrument, channel), self.supplies.name_of(instrument, channel)
        voltage_v, current_a = place.at(self._now_ns), 0.0
        if place.on and name in (GATE, DRAIN):
            demand_a = self._drain_demand_a() if name == DRAIN else self._gate_demand_a()
            current_a = demand_a
            if abs(demand_a) > place.current_limit_a:
                voltage_v *= place.current_limit_a / abs(demand_a)
                current_a = float(np.copysign(place.current_limit_a, demand_a))
        own = self.constants["supply"]
        volts_off = own["voltage_error"] * normal(self.seed, "supply", instrument, channel, "voltage")
        amperes_off = own["current_error"] * normal(self.seed, "supply", instrument, channel, "current")
        return voltage_v * (1.0 + volts_off), current_a * (1.0 + amperes_off)

    def measure_waves(
        self,
        instrument: str,
        receivers: Sequence[str],
        frequencies_hz: Sequence[float] | FloatArray,
        offsets_hz: Sequence[float] | FloatArray,
        if_bandwidth_hz: float,
        averages: int,
        coherent: bool,
        start_ns: int,
        follow: Follow | None = None,
    ) -> tuple[ComplexArray, BoolArray]:
        """Raw waves of an analyser's receivers, root-watt, shape (T, W, P), and flags (W,): above the linear limit.

        `receivers` are the instrument's labels ("R3"); one that is not connected reads its noise. The analyser's own source sits
        at the grid's frequency; other sources stay where they are, or go with the grid by `follow`: (frequencies in Hz, levels in
        dBm) for each such instrument. `offsets_hz` are the tunings from the grid. `coherent`: all tones of a point share one time
        reference; otherwise each tone's phase is arbitrary, but common to its waves.
        """
        grid_hz = np.asarray(frequencies_hz, dtype=np.float64)
        pump, probe = (self._tone(plane, instrument, grid_hz, follow or {}) for plane in (INPUT, OUTPUT))
        state = self.device_state()
        planes = self.bench.waves(pump, probe, state)
        self._inspect_waves(planes, pump, probe)
        how = Filter(if_bandwidth_hz, averages)
        key = self._key(receivers, pump, probe, np.asarray(offsets_hz, dtype=np.float64), how, coherent, start_ns)
        incoming = self._incoming(instrument, receivers, planes, pump, probe, key)
        reader = self.receivers_of(instrument)
        tuned_hz = grid_hz[None, :] + np.asarray(offsets_hz, dtype=np.float64)[:, None]
        change_k = ambient_k(self.constants, start_ns) - ambient_k(self.constants, 0)
        readings = reader.read(receivers, incoming, tuned_hz, how, coherent=coherent, change_k=change_k, key=key)
        limit_dbm = self.wiring["instruments"][instrument].get("receiver", {}).get("linear_dbm", 0.0)
        self.truth.remember(start_ns, pump, probe, state)
        return readings, reader.over_limit(receivers, incoming, limit_dbm)

    def measure_power(self, instrument: str, frequency_hz: float, start_ns: int) -> float:
        """Reading of a power meter, dBm: incident power, its calibration factor applied."""
        own = self.constants["power_meter"]
        power_w = sum(self._incident_w(plane) for plane, what in self.bench.connected.items() if what == "meter")
        error_db = own["error_db"] * normal(self.seed, "power meter") if self.imperfections.power_meter else 0.0
        floor_w, noise = power_ratio(own["floor_dbm"] - 30.0), 0.0
        if self.imperfections.noise:
            key = (instrument, float(frequency_hz), repr(sorted(self._sources.items())), start_ns)
            noise = own["noise"] * normal(self.seed, "power", *key)
        return dbm(power_w * power_ratio(error_db) * (1.0 + noise) + floor_w * (1.0 + 0.3 * abs(noise)))

    def temperature_degc(self, start_ns: int) -> float:
        """Reading of the thermometer beside the bench, degree Celsius."""
        own = self.constants["ambient"]
        reading = own["mean_degc"] + ambient_k(self.constants, start_ns)
        if self.imperfections.noise:
            reading += own["thermometer_error_k"] * normal(self.seed, "thermometer")
            reading += own["thermometer_noise_k"] * normal(self.seed, "thermometer", start_ns)
        return reading

    # Inside -------------------------------------------------------------------------------------------------------------

    def receivers_of(self, instrument: str) -> Receivers:
        """Return the receivers of an analyser."""
        if instrument not in self._receivers:
            connected = [arm.label for arm in self._arms(instrument)]
            self._receivers[instrument] = Receivers(instrument, connected, self.constants, self.seed, self.imperfections)
        return self._receivers[instrument]

    def device_state(self, grid_k: float = _RISE_GRID_K) -> DeviceState:
        """Bias at the device's terminals now, and its temperature rise, on the grid that carriers are kept for."""
        rise_k = round(self.thermal.rise_k(self._now_ns) / grid_k) * grid_k
        return DeviceState(self._bias_now(), rise_k)

    def source(self, instrument: str) -> SourceSetting:
        """How a source stands."""
        return self._sources.get(instrument, SourceSetting())

    def carrier_now(self, state: DeviceState) -> Carrier:
        """Operating point with the pump as it stands."""
        return self.bench.carrier(self._standing(INPUT), state)

    def _bias_now(self) -> Any:
        drain, gate = self.supplies.bias(DRAIN), self.supplies.bias(GATE)
        return self.bench.device.bias(drain.at(self._now_ns), gate.at(self._now_ns))

    def _arms(self, instrument: str) -> list[Any]:
        return [arm for side in self.bench.sides.values() for arm in side.arms.values() if arm.instrument == instrument]

    def _standing(self, plane: str) -> Tone:
        setting = self.source(self.bench.sides[plane].feed.instrument)
        return Tone(np.array([setting.frequency_hz]), np.array([setting.level_dbm]), setting.on)

    def _tone(self, plane: str, instrument: str, grid_hz: FloatArray, follow: Follow) -> Tone:
        """One side's source over the points: the analyser's own on the grid, another where it stands or follows."""
        name = self.bench.sides[plane].feed.instrument
        setting = self.source(name)
        if name in follow:
            frequencies, levels = (np.asarray(values, dtype=np.float64) for values in follow[name])
            return Tone(frequencies, levels, setting.on)
        if name == instrument:
            return Tone(grid_hz, np.full(len(grid_hz), setting.level_dbm), setting.on)
        return Tone(np.full(len(grid_hz), setting.frequency_hz), np.full(len(grid_hz), setting.level_dbm), setting.on)

    def _key(
        self,
        receivers: Sequence[str],
        pump: Tone,
        probe: Tone,
        offsets_hz: FloatArray,
        how: Filter,
        coherent: bool,
        start_ns: int,
    ) -> tuple[Key, ...]:
        """The effective settings of a reading, for its noise."""
        tones = [part for tone in (pump, probe) for part in (tone.frequency_hz.tobytes(), tone.level_dbm.tobytes(), tone.on)]
        return ",".join(receivers), *tones, offsets_hz.tobytes(), how.if_bandwidth_hz, how.averages, coherent, start_ns

    def _incoming(
        self,
        instrument: str,
        receivers: Sequence[str],
        planes: Mapping[str, PlaneWaves],
        pump: Tone,
        probe: Tone,
        key: tuple[Key, ...],
    ) -> Incoming:
        """Waves at the receivers' inputs, with the arbitrary phases that free-running sources have in this reading."""
        points = len(probe.frequency_hz)
        turns = np.exp(2j * np.pi * stream(self.seed, "source phases", *key).random((2, points)))
        turn = np.array([turns[0] ** 2 * np.conj(turns[1]), turns[0], turns[1]])
        waves = np.zeros((3, len(receivers), points), dtype=np.complex128)
        skirt = np.zeros((len(receivers), points), dtype=np.complex128)
        for plane, side in self.bench.sides.items():
            for name, arm in side.arms.items():
                if arm.instrument != instrument or arm.label not in receivers or plane not in planes:
                    continue
                at, place = planes[plane], receivers.index(arm.label)
                toward, away = (part[name].reshape(3, points) for part in (at.network.toward, at.network.away))
                waves[:, place] = (toward * at.a + away * at.b) * turn
                skirt[place] = waves[PUMP, place]
        frequencies = np.array([2.0 * pump.frequency_hz - probe.frequency_hz, pump.frequency_hz, probe.frequency_hz])
        return Incoming(waves, frequencies, skirt)

    def _incident_w(self, plane: str) -> float:
        """Power that goes into what is connected to a plane, from the side's own source as it stands."""
        standing = self._standing(plane)
        if not standing.on:
            return 0.0
        every_hz = np.tile(standing.frequency_hz, 3)
        at = self.bench.terminated_waves(plane, self.bench.connected[plane], standing, PUMP, every_hz)
        return float(np.abs(at.a[PUMP, 0]) ** 2)

    def _drain_demand_a(self) -> float:
        state = self.device_state()
        return self.bench.device.drain_current_a(state.bias, float(abs(self.carrier_now(state).b2)))

    def _gate_demand_a(self) -> float:
        state = self.device_state()
        carrier = self.carrier_now(state)
        return -2e-4 + 1e-3 * float(carrier.coefficients.growth_at(abs(carrier.a1))) * state.bias.activity

    def _dissipated_w(self, rise_k: float) -> float:
        """Power that stays in the device as the supplies are set now."""
        drain, gate = self.supplies.bias(DRAIN), self.supplies.bias(GATE)
        bias = self.bench.device.bias(drain.target_v, gate.target_v)
        state = DeviceState(bias, round(rise_k / _DISSIPATION_GRID_K) * _DISSIPATION_GRID_K)
        carrier = self.carrier_now(state)
        a1, b1, a2, b2 = (float(abs(wave)) ** 2 for wave in (carrier.a1, carrier.b1, carrier.a2, carrier.b2))
        current_a = self.bench.device.drain_current_a(bias, b2**0.5)
        if drain.on:
            current_a = min(current_a, drain.current_limit_a)
        return max(0.0, bias.drain_v * current_a + a1 - b1 + a2 - b2)

    # Damage -------------------------------------------------------------------------------------------------------------

    def _note(self, event: str) -> None:
        self.record.append(Event(self._now_ns, event))

    def _harm(self, item: str, what: str, value: float, limit: float) -> None:
        """Record damage, loudly; again only when it gets worse."""
        worst = self._worst.get((item, what))
        if worst is not None and abs(value) < abs(worst) + 0.5:
            return
        self._worst[item, what] = value
        self.damage.append(Damage(self._now_ns, item, what, float(value), float(limit)))
        _LOG.critical("DAMAGE at %.6f s: %s: %s %.2f, limit %.2f", self._now_ns * 1e-9, item, what, value, limit)

    def _inspect_bias(self) -> None:
        own = self.constants["device"]
        drain, gate = self.supplies.bias(DRAIN), self.supplies.bias(GATE)
        drain_v = drain.at(self._now_ns)
        released_v = self.wiring.get("bias", {}).get(DRAIN, {}).get("released_below_v", 1.0)
        if drain_v > released_v and not gate.on:
            self._harm("device", "gate released under drain voltage", drain_v, released_v)
        if drain_v > own["drain_maximum_v"]:
            self._harm("device", "drain voltage", drain_v, own["drain_maximum_v"])
        if gate.target_v < own["gate_minimum_v"]:
            self._harm("device", "gate voltage", gate.target_v, own["gate_minimum_v"])
        if gate.target_v > own["gate_maximum_v"]:
            self._harm("device", "gate voltage", gate.target_v, own["gate_maximum_v"])
        current_a = min(self._bias_now().quiescent_a, drain.current_limit_a if drain.on else 0.0)
        if current_a > own["drain_maximum_a"]:
            self._harm("device", "drain current", current_a, own["drain_maximum_a"])

    def _inspect_hands(self, plane: str) -> None:
        """Somebody touches a connector."""
        setting = self.source(self.bench.sides[plane].feed.instrument)
        live = [self._standing_dbm(side) for side in (INPUT, OUTPUT)] if setting.on else []
        pump_on = self.source(self.bench.sides[INPUT].feed.instrument).on
        if live and max(live) > _HAZARD_DBM:
            self._harm("operator", f"connector at {plane} handled under RF", max(live), _HAZARD_DBM)
        elif pump_on and self._standing_dbm(INPUT) > _HAZARD_DBM:
            self._harm("operator", f"connector at {plane} handled under RF", self._standing_dbm(INPUT), _HAZARD_DBM)
        drain_v = self.supplies.bias(DRAIN).at(self._now_ns)
        if self.bench.connected[plane] == DEVICE and drain_v > 1.0:
            self._harm("operator", f"connector at {plane} handled under drain voltage", drain_v, 1.0)

    def _standing_dbm(self, plane: str) -> float:
        wave = self.bench.source_wave(plane, self._standing(plane))
        return dbm(float(np.abs(wave[0])) ** 2)

    def _inspect_rf(self) -> None:
        """Levels everywhere, with the sources as they stand."""
        pump, probe = self._standing(INPUT), self._standing(OUTPUT)
        if pump.on or probe.on:
            self._inspect_waves(self.bench.waves(pump, probe, self.device_state()), pump, probe)

    def _inspect_waves(self, planes: Mapping[str, PlaneWaves], pump: Tone, probe: Tone) -> None:
        for found in self._overloads(planes, pump, probe):
            self._harm(*found)

    def _overloads(self, planes: Mapping[str, PlaneWaves], pump: Tone, probe: Tone) -> list[Overload]:
        found: list[Overload] = []
        powers = {
            plane: (_highest_dbm(at.a), _highest_dbm(at.b))
            for plane, at in planes.items()
        }
        for plane, source in ((INPUT, pump), (OUTPUT, probe)):
            side = self.bench.sides[plane]
            if source.on:
                found += along_feed(side, source.frequency_hz, source.level_dbm)
            if plane in powers:
                found += from_plane(side, *powers[plane], probe.frequency_hz, self.wiring["instruments"])
                found += self._overloads_at(plane, *powers[plane])
        return found

    def _overloads_at(self, plane: str, toward_dbm: float, away_dbm: float) -> list[Overload]:
        """Overloads of what is connected to a plane."""
        limits = self.wiring.get("device", {})
        what, found = self.bench.connected[plane], []
        if what == DEVICE:
            level_dbm, side = (toward_dbm, "input") if plane == INPUT else (away_dbm, "output")
            limit_dbm = limits.get(f"maximum_{side}_dbm")
            if limit_dbm is not None and level_dbm > limit_dbm:
                found.append(Overload("device", f"{side} level", level_dbm, limit_dbm))
        if what == "meter":
            found += self._meter_overload(toward_dbm)
        if plane == OUTPUT and self.bench.connected[INPUT] == DEVICE and what != DEVICE:
            found += self._open_output()
        return found

    def _meter_overload(self, level_dbm: float) -> list[Overload]:
        sensors = [
            (name, spec.get("sensor", {}).get("damage_dbm"))
            for name, spec in self.wiring["instruments"].items()
            if spec["role"] == "power-meter"
        ]
        return [
            Overload(name, "input level", level_dbm, limit) for name, limit in sensors if limit is not None and level_dbm > limit
        ]

    def _open_output(self) -> list[Overload]:
        """A biased device that is driven into an empty connector."""
        state = self.device_state()
        level_dbm = dbm(float(abs(self.carrier_now(state).b2)) ** 2)
        if state.bias.activity > 0.05 and level_dbm > 20.0:
            return [Overload("device", "driven into an open output", level_dbm, 20.0)]
        return []


__all__ = ["IMAGE", "PROBE", "PUMP", "Damage", "Event", "World"]


def _highest_dbm(waves: ComplexArray) -> float:
    """Highest total power of the tones over the points."""
    return dbm(float((np.abs(waves) ** 2).sum(axis=0).max()))
