"""The one world that all simulated instruments share: settings in, readings out, time when somebody lets it pass."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any, NamedTuple

import numpy as np

from .bench_state import DEVICE, INPUT, OUTPUT, Bench, DeviceState, PlaneWaves, SourceSetting, Tone, tones_hz
from .imperfections import Imperfections
from .inspection import Damage, Inspector
from .keyed import Key, normal, stream
from .levels import BoolArray, ComplexArray, FloatArray, dbm, power_ratio
from .operating import Carrier
from .receivers import PUMP, Filter, Incoming, Receivers, ambient_k
from .reference import overlaid, reference_world
from .supplies import DRAIN, GATE, Supplies
from .thermal import Stage, Thermal
from .truth import Truth

# The device's behaviour is worked out on this grid of temperature rises: 0.00004 dB of gain apart.
_RISE_GRID_K = 0.002
_DISSIPATION_GRID_K = 0.05

Follow = Mapping[str, tuple[Sequence[float], Sequence[float]]]


class Event(NamedTuple):
    """Something that happened on the bench, at a virtual time."""

    ns: int
    event: str


class World:
    """The bench of a wiring document (see DEVELOPERS.md), with a seed for everything that differs from bench to bench.

    `wiring["rehearsal"]` names the reference world, switches imperfections off (see `Imperfections`) and may replace
    constants: {"world": "R1", "noise": false, "device": {"gain_db": 15.0}}. Raises ValueError for a name that the world
    does not have.
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
        self._inspector = Inspector(wiring, self.constants, self.bench, self.supplies)
        self.damage: list[Damage] = self._inspector.damage
        self.record: list[Event] = []
        self.truth = Truth(self)
        self._now_ns = 0
        self._sources: dict[str, SourceSetting] = {}
        self._receivers: dict[str, Receivers] = {}
        self._heat_w: dict[int, float] = {}

    # --- Time

    @property
    def now_ns(self) -> int:
        """Virtual time since the world began, in ns."""
        return self._now_ns

    def advance(self, duration_ns: int) -> None:
        """Let time pass; the device warms up or cools down meanwhile. Raises ValueError for a negative duration."""
        if duration_ns < 0:
            raise ValueError(f"time does not run backwards ({duration_ns} ns)")
        self._now_ns += duration_ns

    # --- Settings

    def set_source(self, instrument: str, *, frequency_hz: float, level_dbm: float, on: bool) -> None:
        """Set a generator, or the analyser's own source, to a frequency and a level at its output, RF on or off."""
        before = self.source(instrument)
        after = SourceSetting(float(frequency_hz), float(level_dbm), bool(on))
        if after == before:
            return
        if instrument == self.bench.sides[INPUT].feed.instrument:
            self._before_change()
        self._sources[instrument] = after
        if after.on != before.on:
            self._note(f"rf-on {instrument} {level_dbm:.2f} dBm" if on else f"rf-off {instrument}")
        elif on and after.level_dbm != before.level_dbm:
            self._note(f"level {instrument} {level_dbm:.2f} dBm")
        if (after.level_dbm, after.on) != (before.level_dbm, before.on):
            self._inspect_rf()

    def set_supply(self, instrument: str, channel: int, *, voltage_v: float, current_limit_a: float, on: bool) -> None:
        """Set one channel of a dc supply."""
        place, name = self.supplies.channel(instrument, channel), self.supplies.name_of(instrument, channel)
        if (place.voltage_v, place.current_limit_a, place.on) == (voltage_v, current_limit_a, on):
            return
        self._before_change()
        was_on, was_v = place.on, place.voltage_v
        place.set(self._now_ns, float(voltage_v), float(current_limit_a), bool(on))
        if on != was_on:
            self._note(f"{name} on {voltage_v:.3f} V" if on else f"{name} off")
        elif on and voltage_v != was_v:
            self._note(f"{name} set {voltage_v:.3f} V")
        self._inspector.bias(self._now_ns, self._bias_now())
        self._inspect_rf()

    def connect(self, plane: str, what: str) -> None:
        """Connect a standard, a power meter by its name, "device" or "nothing" to a plane: each time a new mating.

        Raises ValueError for a plane or a thing that is not there.
        """
        if plane not in self.bench.sides:
            raise ValueError(f"there is no plane {plane!r}; there is: {', '.join(self.bench.sides)}")
        if what != DEVICE:
            self.bench.standards.reflection(what, np.array([self.constants["centre_hz"]]))
        self._inspector.hands(self._now_ns, plane, self._standing(INPUT), self._standing(OUTPUT))
        self._before_change()
        self.bench.connected[plane] = what
        self.bench.matings[plane] += 1
        self._note(f"connect {plane} {what}")
        self._inspect_rf()

    # --- Readings

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

        `receivers` are the instrument's labels ("R3"); one that is not connected reads its noise. The analyser's own
        source sits at the grid's frequency; other sources stay where they are, or go with the grid by `follow`:
        (frequencies in Hz, levels in dBm) for each such instrument. `offsets_hz` are the tunings from the grid.
        `coherent`: all tones of a point share one time reference; otherwise each tone's phase is arbitrary, but common
        to its waves.
        """
        grid_hz = np.asarray(frequencies_hz, dtype=np.float64)
        pump, probe = _in_sight(*(self._tone(plane, instrument, grid_hz, follow or {}) for plane in (INPUT, OUTPUT)))
        state = self.device_state()
        planes = self.bench.waves(pump, probe, state)
        self._inspector.waves(self._now_ns, planes, pump, probe)
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
        power_w = sum(self._incident_w(plane) for plane, what in self.bench.connected.items() if what == instrument)
        error_db = own["error_db"] * normal(self.seed, "power meter") if self.imperfections.meter_error else 0.0
        floor_w, noise = power_ratio(own["floor_dbm"] - 30.0), 0.0
        if self.imperfections.noise:
            on = sorted((name, *setting.key) for name, setting in self._sources.items() if setting.on)
            key = (instrument, float(frequency_hz), repr(on), start_ns)
            noise = own["noise"] * normal(self.seed, "power", *key)
        return dbm(power_w * power_ratio(error_db) * (1.0 + noise) + floor_w * (1.0 + 0.3 * abs(noise)))

    def temperature_degc(self, start_ns: int) -> float:
        """Reading of the thermometer beside the bench, degree Celsius."""
        own = self.constants["ambient"]
        reading = float(own["mean_degc"]) + ambient_k(self.constants, start_ns)
        if self.imperfections.noise:
            reading += own["thermometer_error_k"] * normal(self.seed, "thermometer")
            reading += own["thermometer_noise_k"] * normal(self.seed, "thermometer", start_ns)
        return reading

    # --- Inside

    def receivers_of(self, instrument: str) -> Receivers:
        """Return the receivers of an analyser."""
        if instrument not in self._receivers:
            connected = [arm.label for arm in self._arms(instrument)]
            self._receivers[instrument] = Receivers(
                instrument, connected, self.constants, self.seed, self.imperfections
            )
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
        tones = [
            part
            for tone in (pump, probe)
            for part in ((tone.frequency_hz.tobytes(), tone.level_dbm.tobytes()) if tone.on else ("off",))
        ]
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
        return Incoming(waves, tones_hz(pump, probe), skirt)

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

    def _before_change(self) -> None:
        """Bring the temperature up to now, before what heats the device changes."""
        self.thermal.settle(self._now_ns)
        self._heat_w.clear()

    def _dissipated_w(self, rise_k: float) -> float:
        """Power that stays in the device as everything is set now."""
        step = round(rise_k / _DISSIPATION_GRID_K)
        if step not in self._heat_w:
            self._heat_w[step] = self._heat_at(step * _DISSIPATION_GRID_K)
        return self._heat_w[step]

    def _heat_at(self, rise_k: float) -> float:
        drain, gate = self.supplies.bias(DRAIN), self.supplies.bias(GATE)
        bias = self.bench.device.bias(drain.target_v, gate.target_v)
        carrier = self.carrier_now(DeviceState(bias, rise_k))
        a1, b1, a2, b2 = (float(abs(wave)) ** 2 for wave in (carrier.a1, carrier.b1, carrier.a2, carrier.b2))
        current_a = self.bench.device.drain_current_a(bias, b2**0.5)
        if drain.on:
            current_a = min(current_a, drain.current_limit_a)
        return max(0.0, bias.drain_v * current_a + a1 - b1 + a2 - b2)

    def _inspect_rf(self) -> None:
        """Look at the levels everywhere, with the sources as they stand."""
        pump, probe = _in_sight(self._standing(INPUT), self._standing(OUTPUT))
        if not (pump.on or probe.on):
            return
        state = self.device_state()
        self._inspector.waves(self._now_ns, self.bench.waves(pump, probe, state), pump, probe)
        self._inspector.open_output(self._now_ns, dbm(float(abs(self.carrier_now(state).b2)) ** 2), state)

    def _note(self, event: str) -> None:
        self.record.append(Event(self._now_ns, event))


def _in_sight(pump: Tone, probe: Tone) -> tuple[Tone, Tone]:
    """A pump that is off stands nowhere: put it where the probe is, whatever it was set to once."""
    return (pump if pump.on else replace(pump, frequency_hz=probe.frequency_hz)), probe
