"""What is set on the bench: sources, connections; and the waves that follow from it at the planes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from .device import Bias, Coefficients, Device
from .imperfections import Imperfections
from .levels import ComplexArray, FloatArray
from .operating import Carrier, Sidebands, linearise, solve_carrier
from .receivers import IMAGE, PROBE, PUMP
from .side import Side, SideNetwork
from .standards import Standards

INPUT, OUTPUT = "input", "output"
DEVICE = "device"
# An image that would fall below this is far from anything that the bench passes.
_LOWEST_HZ = 1e6
_MOST_KNOWN = 4_000
# The probe is on the carrier when it is no farther than this.
ON_CARRIER_HZ = 1.0


@dataclass(frozen=True, slots=True)
class SourceSetting:
    """How a source stands."""

    frequency_hz: float = 1e9
    level_dbm: float = -60.0
    on: bool = False

    @property
    def key(self) -> tuple[float, float]:
        """What a reading's noise depends on while the source is on."""
        return self.frequency_hz, self.level_dbm


@dataclass(frozen=True, slots=True)
class Tone:
    """One side's source over the points of a capture: frequencies in Hz and levels in dBm, shape (P,)."""

    frequency_hz: FloatArray
    level_dbm: FloatArray
    on: bool


@dataclass(frozen=True, slots=True)
class DeviceState:
    """What the device's behaviour depends on besides the waves: bias, and temperature rise in K (rounded)."""

    bias: Bias
    rise_k: float


@dataclass(frozen=True, slots=True)
class PlaneWaves:
    """Waves at one plane, shape (3, P) in the order image, pump, probe; a towards what is connected, b away from it."""

    network: SideNetwork
    a: ComplexArray
    b: ComplexArray


class Bench:
    """Sides, connections and device together. Waves have the phase of sources that start at 0; see `turned`."""

    def __init__(
        self, wiring: Mapping[str, Any], constants: Mapping[str, Any], seed: int, imperfections: Imperfections
    ) -> None:
        planes = {INPUT, OUTPUT, *(signal["plane"] for signal in wiring["signals"].values())}
        self.sides = {plane: Side(plane, wiring, constants, seed) for plane in sorted(planes)}
        self.connected = dict.fromkeys(self.sides, DEVICE)
        self.matings = dict.fromkeys(self.sides, 0)
        self.standards = Standards(wiring, constants, seed, definition_errors=imperfections.definitions)
        self.device = Device(constants, seed, imperfections)
        self._coefficients: dict[tuple[float, DeviceState], Coefficients] = {}
        self._carriers: dict[tuple[Any, ...], Carrier] = {}

    @property
    def device_in_place(self) -> bool:
        """Both of the device's ports are connected to the bench."""
        return self.connected[INPUT] == DEVICE and self.connected[OUTPUT] == DEVICE

    def connection(self) -> tuple[Any, ...]:
        """Everything about the connections that the waves depend on."""
        return tuple((self.connected[plane], self.matings[plane]) for plane in self.sides)

    def network(self, plane: str, frequency_hz: FloatArray) -> SideNetwork:
        """The side as the device sees it now: an empty connector where its port hangs in the air."""
        if self.connected[plane] == DEVICE:
            return self.sides[plane].network(frequency_hz, self.matings[plane])
        empty = self.standards.reflection("nothing", frequency_hz)
        return SideNetwork(empty, np.zeros_like(empty), {}, {})

    def source_wave(self, plane: str, tone: Tone) -> ComplexArray:
        """Wave that the feed of a side delivers, shape (P,)."""
        if not tone.on:
            return np.zeros(len(tone.frequency_hz), dtype=np.complex128)
        return self.sides[plane].feed.waves(tone.frequency_hz, tone.level_dbm)[-1]

    def _coefficients_at(self, frequency_hz: FloatArray, state: DeviceState) -> Coefficients:
        if len(frequency_hz) > 1:
            return self.device.coefficients(frequency_hz, state.bias, state.rise_k)
        key = float(frequency_hz[0]), state
        if key not in self._coefficients:
            _make_room(self._coefficients)
            self._coefficients[key] = self.device.coefficients(key[0], state.bias, state.rise_k)
        return self._coefficients[key]

    def carrier(self, pump: Tone, state: DeviceState, source2: ComplexArray | None = None) -> Carrier:
        """Operating point; `source2` is a source at the output at the pump's own frequency."""
        single = len(pump.frequency_hz) == 1
        key: tuple[Any, ...] = ()
        if single and source2 is None:
            key = float(pump.frequency_hz[0]), float(pump.level_dbm[0]), pump.on, state, self.connection()
            if key in self._carriers:
                return self._carriers[key]
        input_side, output_side = (self.network(plane, pump.frequency_hz) for plane in (INPUT, OUTPUT))
        source1 = input_side.transfer * self.source_wave(INPUT, pump)
        at_output = np.zeros_like(source1) if source2 is None else output_side.transfer * source2
        terms = source1, input_side.reflection, at_output, output_side.reflection
        coefficients = self._coefficients_at(pump.frequency_hz, state)
        carrier = solve_carrier(coefficients, *(complex(term[0]) if single else term for term in terms))
        if key:
            _make_room(self._carriers)
            self._carriers[key] = carrier
        return carrier

    def sidebands(self, pump: Tone, probe_hz: FloatArray, carrier: Carrier, state: DeviceState) -> Sidebands:
        """The device around its operating point, for a probe and its image."""
        return linearise(self.device, state.bias, carrier, pump.frequency_hz, probe_hz, len(probe_hz))

    def device_waves(self, pump: Tone, probe: Tone, state: DeviceState) -> dict[str, PlaneWaves]:
        """Waves at both planes with the device in place (or one of its ports in the air)."""
        points = len(probe.frequency_hz)
        every_hz = tones_hz(pump, probe).reshape(-1)
        networks = {plane: self.network(plane, every_hz) for plane in (INPUT, OUTPUT)}
        source2 = self.source_wave(OUTPUT, probe)
        merged = pump.on and probe.on and bool(np.all(np.abs(probe.frequency_hz - pump.frequency_hz) < ON_CARRIER_HZ))
        carrier = self.carrier(pump, state, source2 if merged else None)
        waves = np.zeros((4, 3, points), dtype=np.complex128)
        waves[:, PUMP] = np.array(
            [np.broadcast_to(w, points) for w in (carrier.a1, carrier.b1, carrier.a2, carrier.b2)]
        )
        if probe.on and not merged:
            sidebands = self.sidebands(pump, probe.frequency_hz, carrier, state)
            v, b = sidebands.solve(*_sideband_terms(networks[INPUT], networks[OUTPUT], source2, points))
            for index, column in ((0, 0), (2, 2)):
                waves[index, PROBE], waves[index, IMAGE] = v[:, column], np.conj(v[:, column + 1])
                waves[index + 1, PROBE], waves[index + 1, IMAGE] = b[:, column], np.conj(b[:, column + 1])
        return {
            INPUT: PlaneWaves(networks[INPUT], waves[0], waves[1]),
            OUTPUT: PlaneWaves(networks[OUTPUT], waves[2], waves[3]),
        }

    def terminated_waves(self, plane: str, what: str, source: Tone, slot: int, every_hz: FloatArray) -> PlaneWaves:
        """Waves at a plane with something linear connected; the side's own source is the tone number `slot`."""
        network = self.sides[plane].network(every_hz, self.matings[plane])
        reflection = self.standards.reflection(what, every_hz)
        sent = np.zeros((3, len(source.frequency_hz)), dtype=np.complex128)
        sent[slot] = self.source_wave(plane, source)
        a = network.transfer * sent.reshape(-1) / (1.0 - network.reflection * reflection)
        return PlaneWaves(network, a.reshape(sent.shape), (a * reflection).reshape(sent.shape))

    def waves(self, pump: Tone, probe: Tone, state: DeviceState) -> dict[str, PlaneWaves]:
        """Waves at both planes, as everything is connected now."""
        planes: dict[str, PlaneWaves] = {}
        if DEVICE in (self.connected[INPUT], self.connected[OUTPUT]):
            planes = self.device_waves(pump, probe, state)
        every_hz = tones_hz(pump, probe).reshape(-1)
        for plane, source, slot in ((INPUT, pump, PUMP), (OUTPUT, probe, PROBE)):
            if self.connected[plane] != DEVICE:
                planes[plane] = self.terminated_waves(plane, self.connected[plane], source, slot, every_hz)
        return planes


def tones_hz(pump: Tone, probe: Tone) -> FloatArray:
    """Frequencies (3, P) of image, pump and probe."""
    image_hz = np.maximum(2.0 * pump.frequency_hz - probe.frequency_hz, _LOWEST_HZ)
    return np.array([image_hz, pump.frequency_hz, probe.frequency_hz])


def _sideband_terms(
    input_side: SideNetwork, output_side: SideNetwork, source2: ComplexArray, points: int
) -> tuple[ComplexArray, ComplexArray]:
    """Reflections and sources in the order a1(+), a1(-)*, a2(+), a2(-)*, shape (P, 4)."""
    reflection = np.empty((points, 4), dtype=np.complex128)
    for column, network in ((0, input_side), (2, output_side)):
        image, _, probe = network.reflection.reshape(3, points)
        reflection[:, column], reflection[:, column + 1] = probe, np.conj(image)
    source = np.zeros_like(reflection)
    source[:, 2] = output_side.transfer.reshape(3, points)[PROBE] * source2
    return reflection, source


def _make_room(known: dict[Any, Any]) -> None:
    if len(known) > _MOST_KNOWN:
        known.clear()
