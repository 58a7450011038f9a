"""What can stand at a plane instead of the device, as it truly reflects: near its definition, by the seed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from .keyed import normal, phasor
from .levels import ComplexArray, FloatArray

_Z0_OHM = 50.0


def _polynomial(coefficients: Sequence[float], frequency_hz: FloatArray) -> FloatArray:
    return np.polyval(np.asarray(coefficients[::-1], dtype=np.float64), frequency_hz).astype(np.float64)


def _behind_line(
    termination: ComplexArray, frequency_hz: FloatArray, delay_s: float, loss_ohm_per_s: float, line_ohm: float
) -> ComplexArray:
    """Reflection of a termination behind an offset line with skin-effect loss (METHODS section 2)."""
    skin = np.sqrt(frequency_hz / 1e9)
    attenuation = loss_ohm_per_s * delay_s / (2.0 * line_ohm) * skin
    phase = 2.0 * np.pi * frequency_hz * delay_s + attenuation
    impedance = line_ohm + (1.0 - 1j) * loss_ohm_per_s / (4.0 * np.pi * frequency_hz) * skin
    step = (impedance - _Z0_OHM) / (impedance + _Z0_OHM)
    turn = np.exp(-2.0 * (attenuation + 1j * phase))
    top = step * (1.0 - turn - step * termination) + turn * termination
    return top / (1.0 - step * (turn * step + termination * (1.0 - turn)))


class Standards:
    """True reflections of the kit's standards, of the power meter's sensor and of an empty connector."""

    def __init__(
        self, wiring: Mapping[str, Any], constants: Mapping[str, Any], seed: int, *, definition_errors: bool = True
    ) -> None:
        self._specs: Mapping[str, Mapping[str, Any]] = wiring.get("standards", {})
        self._constants, self._seed = constants, seed
        self._size = 1.0 if definition_errors else 0.0
        meters = {name: one for name, one in wiring["instruments"].items() if one["role"] == "power-meter"}
        self._sensor_sizes = {name: one.get("sensor", {}).get("reflection", 0.0) for name, one in meters.items()}

    def names(self) -> tuple[str, ...]:
        """Everything that `reflection` knows."""
        return (*self._specs, *self._sensor_sizes, "nothing")

    def reflection(self, what: str, frequency_hz: FloatArray) -> ComplexArray:
        """True reflection; raises ValueError for something that nobody has."""
        if what == "nothing":
            return self._empty(frequency_hz)
        if what in self._sensor_sizes:
            return np.full(len(frequency_hz), self._sensor_sizes[what] * phasor(self._seed, "sensor"))
        if what not in self._specs:
            raise ValueError(f"nothing called {what!r} can be connected; there is: {', '.join(self.names())}, device")
        spec = self._specs[what]
        if spec["kind"] == "data":
            return self._tabulated(spec, frequency_hz)
        delay_s, termination = self._termination(what, spec, frequency_hz)
        loss, line_ohm = spec.get("loss_ohm_per_s", 0.0), spec.get("line_ohm", _Z0_OHM)
        return _behind_line(termination, frequency_hz, delay_s, loss, line_ohm)

    def _termination(self, what: str, spec: Mapping[str, Any], frequency_hz: FloatArray) -> tuple[float, ComplexArray]:
        """Offset delay in s, and reflection of what ends the offset line."""
        omega = 2.0 * np.pi * frequency_hz
        delay_s = spec.get("delay_s", 0.0)
        if spec["kind"] == "match":
            error = self._errors(what, "match")
            resistance = spec.get("resistance_ohm", _Z0_OHM) + error["resistance_ohm"]
            impedance = resistance + 1j * omega * (spec.get("inductance_h", 0.0) + error["inductance_h"])
            return delay_s, (impedance - _Z0_OHM) / (impedance + _Z0_OHM)
        if spec["kind"] == "open":
            error = self._errors(what, "open")
            capacitance = _polynomial(spec.get("capacitance", [0.0]), frequency_hz) + error["capacitance_f"]
            load = 1j * omega * (capacitance + error["capacitance_f_per_hz2"] * frequency_hz**2) * _Z0_OHM
            return delay_s + error["delay_s"], (1.0 - load) / (1.0 + load)
        if spec["kind"] == "short":
            # An offset short has no inductance in its definition, and no error in it.
            error = self._errors(what, "short" if "inductance" in spec else "offset_short")
            inductance = _polynomial(spec.get("inductance", [0.0]), frequency_hz) + error.get("inductance_h", 0.0)
            load = 1j * omega * inductance / _Z0_OHM
            return delay_s + error["delay_s"], (load - 1.0) / (load + 1.0)
        raise ValueError(f"standard {what!r}: kind is open, short, match or data, not {spec['kind']!r}")

    def _errors(self, what: str, kind: str) -> dict[str, float]:
        sigmas: Mapping[str, float] = self._constants["definition_error"][kind]
        return {
            name: self._size * sigma * normal(self._seed, "definition", what, name) for name, sigma in sigmas.items()
        }

    def _tabulated(self, spec: Mapping[str, Any], frequency_hz: FloatArray) -> ComplexArray:
        known_hz = spec["frequency_hz"]
        pairs = np.asarray(spec["reflection"], dtype=np.float64)
        real, imaginary = (np.interp(frequency_hz, known_hz, pairs[:, column]) for column in (0, 1))
        return real + 1j * imaginary

    def _empty(self, frequency_hz: FloatArray) -> ComplexArray:
        own = self._constants["unconnected"]
        load = 2j * np.pi * frequency_hz * own["capacitance_f"] * _Z0_OHM
        reflection: ComplexArray = own["magnitude"] * (1.0 - load) / (1.0 + load)
        return reflection
