"""The device: a depletion-mode power transistor stage, as a smooth function of the two waves that enter it.

In the frame of its input wave (u = a1/|a1|, A = |a1|, x = a2 u*) it gives b = u f(A, x):

    f1 = S11(A) A + S12 x + t12 w(A) x*
    f2 = g(A) A + S22(A) x + t22 w(A) x* + q(A) (e1 x^2 + e2 |x|^2 + e3 x*^2)

with a compressing gain g (Rapp's knee, p = 2, and a smooth phase shift), and w, q growing smoothly from 0. Everything
that holds near an operating point (S and T coefficients at the sidebands) is the derivative of this one function, so
the parts fit together. All expressions work on Python numbers and on arrays alike: one reading is scalar arithmetic,
a followed sweep is arrays.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from .imperfections import Imperfections
from .keyed import normal, phasor, stream
from .levels import ComplexArray, FloatArray, root_watts, wave_ratio

# A complex number or an array of them: arithmetic is the same.
Value = Any


@dataclass(frozen=True, slots=True)
class Bias:
    """What the supplies do to the device."""

    drain_v: float
    gate_v: float
    quiescent_a: float
    activity: float
    transconductance: float


@dataclass(frozen=True, slots=True)
class Coefficients:
    """The device at a frequency, a bias and a temperature (numbers, or arrays over frequency)."""

    gain: Value
    saturation: Value
    am_pm_rad: float
    s11: Value
    s11_move: Value
    s12: Value
    s22: Value
    s22_move: Value
    t12: Value
    t22: Value
    second_order: tuple[complex, complex, complex]
    growth: float

    def _drive(self, magnitude: Value) -> tuple[Value, Value, Value, Value]:
        """v = |g0| A / limit, its derivative dv/dA, w(v) and dw/dv."""
        slope = abs(self.gain) / self.saturation
        v = slope * magnitude
        square = 1.0 + v * v
        return v, slope, self.growth * v * v / square, self.growth * 2.0 * v / (square * square)

    def outputs(self, magnitude: Value, x: Value) -> tuple[Value, Value]:
        """Return f1 and f2 for |a1| and x = a2 u*."""
        v, _, w, _ = self._drive(magnitude)
        mirrored = x.conjugate()
        fourth = 1.0 + v**4
        shift = self.am_pm_rad * v * v / (1.0 + v * v)
        gain = self.gain * (1.0 + 1j * shift) / ((1.0 + shift * shift) ** 0.5 * fourth**0.25)
        e1, e2, e3 = self.second_order
        bend = self.growth * v * fourth**0.25 / ((1.0 + v * v) * self.saturation)
        f1 = (self.s11 + self.s11_move * w) * magnitude + self.s12 * x + self.t12 * w * mirrored
        f2 = gain * magnitude + (self.s22 + self.s22_move * w) * x + self.t22 * w * mirrored
        return f1, f2 + bend * (e1 * x * x + e2 * x * mirrored + e3 * mirrored * mirrored)

    def partials(self, magnitude: Value, x: Value) -> tuple[tuple[Value, Value, Value], tuple[Value, Value, Value]]:
        """Derivatives of f1 and of f2 with respect to A, x and x*."""
        v, slope, w, dw = self._drive(magnitude)
        mirrored, square, fourth = x.conjugate(), 1.0 + v * v, 1.0 + v**4
        dw = dw * slope
        shift = self.am_pm_rad * v * v / square
        dshift = self.am_pm_rad * 2.0 * v / (square * square)
        gain = self.gain * (1.0 + 1j * shift) / ((1.0 + shift * shift) ** 0.5 * fourth**0.25)
        gain_slope = slope * gain * (1j * dshift / (1.0 + shift * shift) - v**3 / fourth)
        e1, e2, e3 = self.second_order
        scale = self.growth * fourth**0.25 / (square * self.saturation)
        dbend = slope * scale * (1.0 + v**4 / fourth - 2.0 * v * v / square)
        bend = scale * v
        first = (
            self.s11 + self.s11_move * (w + magnitude * dw) + self.t12 * dw * mirrored,
            self.s12,
            self.t12 * w,
        )
        second = (
            gain
            + magnitude * gain_slope
            + dw * (self.s22_move * x + self.t22 * mirrored)
            + dbend * (e1 * x * x + e2 * x * mirrored + e3 * mirrored * mirrored),
            self.s22 + self.s22_move * w + bend * (2.0 * e1 * x + e2 * mirrored),
            self.t22 * w + bend * (e2 * x + 2.0 * e3 * mirrored),
        )
        return first, second

    def growth_at(self, magnitude: Value) -> Value:
        """Return w(A): 0 at small drive, 1 at the reference drive."""
        return self._drive(magnitude)[2]


class Device:
    """The device under test, with its spread from specimen to specimen by the seed."""

    def __init__(self, constants: Mapping[str, Any], seed: int, imperfections: Imperfections) -> None:
        self.own: Mapping[str, Any] = constants["device"]
        self._centre_hz, self._band_hz = constants["centre_hz"], constants["half_band_hz"]
        self._seed, self.dispersive = seed, imperfections.dispersion
        self._gain_db = self.own["gain_db"] + self.own["gain_spread_db"] * self._spread("gain")
        self._linear = {
            name: self._scattered(name)
            for name in ("s11", "s11_move", "s22", "s22_move", "t22", "t12", "cold_s11", "cold_s22")
        }
        size = self.own["second_order"] / math.sqrt(3.0) if imperfections.second_order else 0.0
        self._second_order = tuple(size * phasor(seed, "second order", n) for n in range(3))
        self._resonance = self.own["bias_resonance"]["size"] if imperfections.bias_resonance else 0.0
        self._resonance_phasor = phasor(seed, "bias resonance")
        spread_v = self.own["gate_spread_v"] * (2.0 * float(stream(seed, "device", "gate").random()) - 1.0)
        self.nominal_gate_v = self.own["gate_voltage_v"] + spread_v
        reference = wave_ratio(self.own["reference_drive_dbm"] + self.own["gain_db"] - self.own["saturation_dbm"]) ** 2
        self._growth = (1.0 + reference) / reference

    def _spread(self, name: str) -> float:
        """A normal number, its tails cut: no specimen is a wild one."""
        return float(np.clip(normal(self._seed, "device", name), -2.0, 2.0))

    def _scattered(self, name: str) -> tuple[complex, float]:
        """Value at the band's centre, with this specimen's spread in angle, and delay in s.

        Magnitudes are the constants' own: a figure that is quoted for the world stays comparable.
        """
        spec = self.own[name]
        angle_rad = math.radians(spec["angle_deg"] + self.own["angle_spread_deg"] * self._spread(name))
        return spec["magnitude"] * _turned(angle_rad), spec["delay_s"]

    def _at(self, name: str, frequency_hz: Value) -> Value:
        value, delay_s = self._linear[name]
        return value * _turned(-2.0 * math.pi * delay_s * (frequency_hz - self._centre_hz))

    def bias(self, drain_v: float, gate_v: float) -> Bias:
        """Square-law channel: quiescent current, and how much of an amplifier the device is at this bias."""
        own = self.own
        overdrive = gate_v - (self.nominal_gate_v - own["gate_swing_v"])
        softness = 0.03
        channel_v = softness * math.log1p(math.exp(min(overdrive / softness, 500.0)))
        knee = (1.0 - math.exp(-max(drain_v, 0.0) / 1.5)) / (1.0 - math.exp(-own["drain_voltage_v"] / 1.5))
        quiescent_a = own["quiescent_current_a"] * (channel_v / own["gate_swing_v"]) ** 2 * knee
        relative = quiescent_a / own["quiescent_current_a"]
        activity = 1.25 * relative / (relative + 0.25) * knee
        return Bias(drain_v, gate_v, quiescent_a, activity, math.sqrt(activity))

    def linear(self, frequency_hz: Value, bias: Bias) -> tuple[Value, Value, Value]:
        """S11, S12 and S22 at small drive: between the cold device's and the active one's."""
        own, active = self.own, bias.activity
        cold11, cold22 = self._at("cold_s11", frequency_hz), self._at("cold_s22", frequency_hz)
        s11 = cold11 + active * (self._at("s11", frequency_hz) - cold11)
        s22 = cold22 + active * (self._at("s22", frequency_hz) - cold22)
        turn = -2.0 * math.pi * own["s12_delay_s"] * (frequency_hz - self._centre_hz)
        s12_size = wave_ratio(own["return_gain_db"] - own["gain_db"])
        return s11, s12_size * _turned(math.radians(own["s12_angle_deg"]) + turn), s22

    def coefficients(self, frequency_hz: Value, bias: Bias, rise_k: float) -> Coefficients:
        """Evaluate the device; the temperature rise acts on the gain."""
        own, active = self.own, bias.activity
        s11, s12, s22 = self.linear(frequency_hz, bias)
        place = (frequency_hz - self._centre_hz) / self._band_hz
        place = place / (1.0 + (place / 6.0) ** 2) ** 0.5
        gain_db = self._gain_db + own["gain_slope_db"] * place + own["gain_curve_db"] * place**2
        gain_db = gain_db + own["gain_db_per_k"] * rise_k
        turn = -2.0 * math.pi * own["gain_delay_s"] * (frequency_hz - self._centre_hz)
        angle = math.radians(own["gain_angle_deg"]) + turn
        # A cold device still leaks forward as much as backward: it is a passive, reciprocal two-port.
        gain = s12 + bias.transconductance * (10.0 ** (gain_db / 20.0) * _turned(angle) - s12)
        volts = max(bias.drain_v, 0.02 * own["drain_voltage_v"]) / own["drain_voltage_v"]
        saturation = root_watts(own["saturation_dbm"]) * volts if active > 1e-6 else 1e6
        first, second, third = self._second_order
        return Coefficients(
            gain=gain,
            saturation=saturation,
            am_pm_rad=own["am_pm_rad"],
            s11=s11,
            s11_move=active * self._at("s11_move", frequency_hz),
            s12=s12,
            s22=s22,
            s22_move=active * self._at("s22_move", frequency_hz),
            t12=active * self._at("t12", frequency_hz),
            t22=active * self._at("t22", frequency_hz),
            second_order=(first, second, third),
            growth=self._growth,
        )

    def baseband(self, offset_hz: FloatArray) -> ComplexArray:
        """Bias network's response h(Delta) to the envelope, h(-Delta) = h(Delta)*: 1 at its resonance, 0 at Delta 0."""
        own = self.own["bias_resonance"]
        ratio = np.asarray(offset_hz, dtype=np.float64) / own["offset_hz"]
        forward = 1j * ratio / own["quality"]
        response: ComplexArray = forward / (1.0 - ratio**2 + forward)
        return response

    def bias_reaction(self, activity: float) -> tuple[complex, float, float]:
        """Strength of the bias network's reaction on b2; weights of a1 and a2 in the envelope that drives it."""
        return self._resonance * activity * self._resonance_phasor, self.own["bias_resonance"]["input_weight"], 1.0

    def drain_current_a(self, bias: Bias, output_wave: float) -> float:
        """Drain current at an output wave's magnitude (root-watt), as a class-AB stage draws it."""
        from_rf = self.own["drain_current_per_root_watt"] * output_wave * min(bias.activity, 1.0)
        return math.hypot(bias.quiescent_a, from_rf)


def _turned(angle_rad: Value) -> Value:
    """exp(j angle): a Python complex for a number, so that a single reading stays scalar arithmetic."""
    return np.exp(1j * angle_rad) if isinstance(angle_rad, np.ndarray) else cmath.exp(1j * angle_rad)
