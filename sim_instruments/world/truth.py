"""What is really so, for tests only: the product can never ask."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from .bench_state import INPUT, OUTPUT, DeviceState, Tone
from .levels import ComplexArray, FloatArray
from .supplies import DRAIN, GATE

if TYPE_CHECKING:
    from .world import World

_MOST_READINGS = 20_000


@dataclass(frozen=True, slots=True)
class ErrorTerms:
    """One-port error terms of a pair of receivers, with a perfect connection and before drift; arrays over frequency.

    Gm = e00 + e10e01 G / (1 - e11 G), and K = a2 per incident reading when b2 is 0.
    """

    e00: ComplexArray
    e11: ComplexArray
    e10e01: ComplexArray
    k: ComplexArray


@dataclass(frozen=True, slots=True)
class HotTruth:
    """The device around its operating point; arrays over points. Ratios are of waves at the device's own planes.

    reflection: b2(+)/a2(+) with a2(-) = 0 and this bench at port 1. conversion: b2(-)/a2(+)* likewise, with its phase
    counted from twice the phase of a1(0); conversion_to_b2: counted from twice the phase of b2(0). s22, t22: the device
    alone (a1 = 0 at the sidebands). drive_dbm: power that the pump's side delivers to a matched meter at the
    device-input plane; input_dbm, output_dbm: |a1|^2, |b2|^2 with this bench; matched_output_dbm: |B|^2, into a
    reflection of 0.
    """

    probe_hz: FloatArray
    pump_hz: FloatArray
    reflection: ComplexArray
    conversion: ComplexArray
    conversion_to_b2: ComplexArray
    s22: ComplexArray
    t22: ComplexArray
    drive_dbm: FloatArray
    input_dbm: FloatArray
    output_dbm: FloatArray
    matched_output_dbm: FloatArray
    rise_k: float

    @property
    def gain_db(self) -> FloatArray:
        """Gain from the drive to the output power with this bench."""
        return self.output_dbm - self.drive_dbm


class Truth:
    """Answers about one world."""

    def __init__(self, world: World) -> None:
        self._world = world
        self._readings: dict[int, tuple[Tone, Tone, DeviceState]] = {}

    def remember(self, start_ns: int, pump: Tone, probe: Tone, state: DeviceState) -> None:
        """Keep the conditions of a reading, by its start; the oldest make room in a long night."""
        self._readings[start_ns] = pump, probe, state
        if len(self._readings) > _MOST_READINGS:
            del self._readings[next(iter(self._readings))]

    @property
    def starts_ns(self) -> tuple[int, ...]:
        """Starts of the readings that are still known."""
        return tuple(self._readings)

    def reading(self, start_ns: int) -> HotTruth:
        """Return the truth at a reading's sources, bias and temperature, with the connections of now.

        Raises KeyError for a start at which nothing was read.
        """
        pump, probe, state = self._readings[start_ns]
        return self._hot(pump, probe.frequency_hz, state)

    def hot(
        self,
        frequency_hz: Sequence[float] | FloatArray | float,
        *,
        drive_dbm: float | None = None,
        pump_level_dbm: float | None = None,
        offset_hz: float = -7e6,
        rise_k: float | None = None,
    ) -> HotTruth:
        """Return the truth for probe frequencies with the pump `offset_hz` beside them.

        The pump's level is given at its output, or as drive: the power into a matched meter at the device-input plane.
        Bias is the present one, or the nominal one while the drain is off; the temperature rise is the present one
        unless given. Raises ValueError unless exactly one of drive and level is given.
        """
        probe_hz = np.atleast_1d(np.asarray(frequency_hz, dtype=np.float64))
        pump_hz = probe_hz + offset_hz
        if (drive_dbm is None) == (pump_level_dbm is None):
            raise ValueError("say either the drive or the pump's level")
        if drive_dbm is not None:
            level_dbm = self._levels_for(drive_dbm, pump_hz)
        else:
            level_dbm = np.full(len(pump_hz), pump_level_dbm, dtype=np.float64)
        state = self.bias_state(rise_k)
        return self._hot(Tone(pump_hz, level_dbm, True), probe_hz, state)

    def bias_state(self, rise_k: float | None = None) -> DeviceState:
        """Present bias (nominal while the drain is off) and temperature rise."""
        world, device = self._world, self._world.bench.device
        state = world.device_state()
        bias = state.bias
        if not (world.supplies.bias(DRAIN).on and world.supplies.bias(GATE).on):
            bias = device.bias(device.own["drain_voltage_v"], device.nominal_gate_v)
        return DeviceState(bias, state.rise_k if rise_k is None else rise_k)

    def cold(self, frequency_hz: Sequence[float] | FloatArray) -> ComplexArray:
        """Output reflection of the unbiased device with this bench at port 1."""
        probe_hz = np.asarray(frequency_hz, dtype=np.float64)
        off = Tone(probe_hz, np.full(len(probe_hz), -60.0), False)
        bias = self._world.bench.device.bias(0.0, 0.0)
        return self._hot(off, probe_hz, DeviceState(bias, 0.0)).reflection

    def standard(self, what: str, frequency_hz: Sequence[float] | FloatArray) -> ComplexArray:
        """True reflection of a standard, of a power meter or of "nothing"."""
        return self._world.bench.standards.reflection(what, np.asarray(frequency_hz, dtype=np.float64))

    def error_terms(
        self,
        frequency_hz: Sequence[float] | FloatArray,
        plane: str = OUTPUT,
        incident: str = "incident",
        reflected: str = "reflected",
    ) -> ErrorTerms:
        """True error terms of two receivers (names of the wiring's receivers part) at a plane."""
        side = self._world.bench.sides[plane]
        network = side.ideal_network(np.asarray(frequency_hz, dtype=np.float64))
        gains = {}
        for name in (incident, reflected):
            arm = side.arms[name]
            gains[name] = self._world.receivers_of(arm.instrument).gain(arm.label)
        pr, qr = (part[incident] * gains[incident] for part in (network.toward, network.away))
        pm, qm = (part[reflected] * gains[reflected] for part in (network.toward, network.away))
        e00, e11 = pm / pr, -qr / pr
        return ErrorTerms(e00, e11, qm / pr + e00 * e11, 1.0 / pr)

    @property
    def kappa_per_w(self) -> complex:
        """kappa of the receivers, per watt at their inputs; 0 with compression off."""
        names = [name for name, spec in self._world.wiring["instruments"].items() if spec["role"] == "wave-receiver"]
        return self._world.receivers_of(names[0]).kappa

    def bench_reflection(self, plane: str, frequency_hz: Sequence[float] | FloatArray) -> ComplexArray:
        """What the bench reflects to the device at a plane, with the connection of now."""
        world = self._world.bench
        return world.sides[plane].network(np.asarray(frequency_hz, dtype=np.float64), world.matings[plane]).reflection

    def quiescent_gate_v(self) -> float:
        """Gate voltage at which this specimen draws its nominal quiescent current."""
        return float(self._world.bench.device.nominal_gate_v)

    def _levels_for(self, drive_dbm: float, pump_hz: FloatArray) -> FloatArray:
        """Levels of the pump that bring a drive, by bisection: the chain compresses, but it rises."""
        low, high = np.full(len(pump_hz), -150.0), np.full(len(pump_hz), 40.0)
        for _ in range(60):
            middle = 0.5 * (low + high)
            below = self._drive_dbm(pump_hz, middle) < drive_dbm
            low, high = np.where(below, middle, low), np.where(below, high, middle)
        level_dbm: FloatArray = 0.5 * (low + high)
        return level_dbm

    def _drive_dbm(self, pump_hz: FloatArray, level_dbm: FloatArray) -> FloatArray:
        bench = self._world.bench
        transfer = bench.sides[INPUT].network(pump_hz, bench.matings[INPUT]).transfer
        return _dbm(transfer * bench.source_wave(INPUT, Tone(pump_hz, level_dbm, True)))

    def _hot(self, pump: Tone, probe_hz: FloatArray, state: DeviceState) -> HotTruth:
        bench, points = self._world.bench, len(probe_hz)
        carrier = bench.carrier(pump, state)
        sidebands = bench.sidebands(pump, probe_hz, carrier, state)
        every_hz = np.concatenate([probe_hz, 2.0 * pump.frequency_hz - probe_hz])
        plus, minus = bench.network(INPUT, every_hz).reflection.reshape(2, points)
        shown = sidebands.from_output(np.stack([plus, np.conj(minus)], axis=-1))
        frame = np.broadcast_to(carrier.frame, points)
        b2 = np.broadcast_to(carrier.b2, points)
        output_frame = np.where(np.abs(b2) > 0, b2, 1.0) / np.where(np.abs(b2) > 0, np.abs(b2), 1.0)
        image = np.conj(shown[:, 1, 0])
        return HotTruth(
            probe_hz=probe_hz,
            pump_hz=pump.frequency_hz,
            reflection=shown[:, 0, 0],
            conversion=image / frame**2,
            conversion_to_b2=np.asarray(image / output_frame**2, dtype=np.complex128),
            s22=sidebands.matrix[:, 2, 2],
            t22=np.conj(sidebands.matrix[:, 3, 2]) / frame**2,
            drive_dbm=self._drive_dbm(pump.frequency_hz, pump.level_dbm) if pump.on else np.full(points, -400.0),
            input_dbm=np.broadcast_to(_dbm(carrier.a1), points),
            output_dbm=np.broadcast_to(_dbm(carrier.b2), points),
            matched_output_dbm=np.broadcast_to(
                _dbm(carrier.coefficients.outputs(abs(carrier.a1), 0.0 * carrier.a1)[1]), points
            ),
            rise_k=state.rise_k,
        )


def _dbm(wave: ComplexArray | complex) -> FloatArray:
    return np.asarray(20.0 * np.log10(np.maximum(np.abs(wave), 1e-21)) + 30.0)
