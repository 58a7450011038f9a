"""The operating point: what the pump makes of the device between the two sides of the bench.

Carrier: a1 = s1 + G1 b1, a2 = s2 + G2 b2 with the device's b(a1, a2), by fixed-point iteration (the loop
gain is small).
Sidebands: the device is linear in (a1(+), a1(-)*, a2(+), a2(-)*) around that point, its derivatives being the
coefficients; the bench reflects each sideband at its own frequency.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from .device import Bias, Coefficients, Device
from .levels import ComplexArray, FloatArray

# A complex number or an array of them over the points of a followed sweep.
Value = Any

_TOLERANCE = 1e-14
_MOST_ITERATIONS = 300
# Root-watt below which there is no pump.
_NO_PUMP = 1e-30


@dataclass(frozen=True, slots=True)
class Carrier:
    """Waves at the pump's frequency, root-watt: numbers, or arrays over points."""

    coefficients: Coefficients
    a1: Value
    b1: Value
    a2: Value
    b2: Value

    @property
    def frame(self) -> Value:
        """u = a1/|a1|, 1 where there is no pump."""
        return _direction(self.a1)


def _direction(wave: Value) -> Value:
    size = abs(wave)
    if isinstance(wave, np.ndarray):
        present = size > _NO_PUMP
        return np.where(present, wave, 1.0) / np.where(present, size, 1.0)
    return wave / size if size > _NO_PUMP else 1.0 + 0.0j


def solve_carrier(
    coefficients: Coefficients, source1: Value, reflection1: Value, source2: Value, reflection2: Value
) -> Carrier:
    """Waves at the pump's frequency with both sides of the bench; sources and reflections as numbers or as arrays."""
    a1, a2 = source1, source2
    b1 = b2 = 0.0 * source1
    for _ in range(_MOST_ITERATIONS):
        frame = _direction(a1)
        f1, f2 = coefficients.outputs(abs(a1), a2 * frame.conjugate())
        b1, b2 = frame * f1, frame * f2
        next1, next2 = source1 + reflection1 * b1, source2 + reflection2 * b2
        settled = abs(next1 - a1) + abs(next2 - a2) <= _TOLERANCE * (abs(next1) + abs(next2))
        a1, a2 = next1, next2
        if settled if isinstance(settled, bool) else settled.all():
            break
    return Carrier(coefficients, a1, b1, a2, b2)


def _wirtinger(frame: Value, size: Value, x: Value, f: Value, slopes: tuple[Value, Value, Value]) -> tuple[Value, ...]:
    """Derivatives of b = u f(A, x) with respect to a1, a1*, a2 and a2*."""
    slope_a, slope_x, slope_mirrored = slopes
    driven = np.abs(size) > _NO_PUMP
    size = np.where(driven, size, 1.0)
    # Where there is no pump, x is 0 as well, and f/A is its limit.
    level = np.where(driven, f / size, slope_a)
    sway = np.where(driven, (slope_x * x - slope_mirrored * np.conj(x)) / size, 0.0)
    turned = frame * frame
    return (
        0.5 * (level + slope_a - sway),
        0.5 * turned * (slope_a - level + sway),
        slope_x,
        turned * slope_mirrored,
    )


@dataclass(frozen=True, slots=True)
class Sidebands:
    """The device around its operating point: b = matrix v, v = (a1(+), a1(-)*, a2(+), a2(-)*); shape (P, 4, 4)."""

    matrix: ComplexArray

    def solve(self, reflection: ComplexArray, source: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
        """v and b, shape (P, 4), for the bench's reflections and sources in the order of v (conjugated where v is)."""
        loop = np.eye(4) - reflection[:, :, None] * self.matrix
        v: ComplexArray = np.linalg.solve(loop, source[:, :, None])[:, :, 0].astype(np.complex128, copy=False)
        b: ComplexArray = (self.matrix @ v[:, :, None])[:, :, 0]
        return v, b

    def from_output(self, reflection1: ComplexArray) -> ComplexArray:
        """What port 2 shows with port 1 closed by the bench: (b2(+), b2(-)*) per (a2(+), a2(-)*), shape (P, 2, 2)."""
        own, across = self.matrix[:, :2, :2], self.matrix[:, :2, 2:]
        closed = np.eye(2) - reflection1[:, :, None] * own
        a1 = np.linalg.solve(closed, reflection1[:, :, None] * across)
        return self.matrix[:, 2:, 2:] + self.matrix[:, 2:, :2] @ a1


def linearise(
    device: Device, bias: Bias, carrier: Carrier, pump_hz: FloatArray, probe_hz: FloatArray, points: int
) -> Sidebands:
    """Sidebands of a carrier; `probe_hz` is "+", its image about the pump is "-". Arrays of length `points`."""
    frame, size = carrier.frame, abs(carrier.a1)
    x = carrier.a2 * np.conj(frame)
    slopes1, slopes2 = carrier.coefficients.partials(size, x)
    row1 = _wirtinger(frame, size, x, carrier.b1 * np.conj(frame), slopes1)
    row2 = _wirtinger(frame, size, x, carrier.b2 * np.conj(frame), slopes2)
    matrix = np.empty((points, 4, 4), dtype=np.complex128)
    for port, row in ((0, row1), (2, row2)):
        for column, value in ((0, row[0]), (1, row[1]), (2, row[2]), (3, row[3])):
            matrix[:, port, column] = value
            matrix[:, port + 1, column ^ 1] = np.conj(value)
    if device.dispersive:
        _add_dispersion(matrix, device, bias, pump_hz, probe_hz)
    _add_bias_reaction(matrix, device, bias, carrier, probe_hz - pump_hz)
    return Sidebands(matrix)


def _add_dispersion(
    matrix: ComplexArray, device: Device, bias: Bias, pump_hz: FloatArray, probe_hz: FloatArray
) -> None:
    """The passive parts of the device at the sidebands' own frequencies."""
    points = len(probe_hz)
    s11, s12, s22 = device.linear(np.concatenate([pump_hz, probe_hz, 2.0 * pump_hz - probe_hz]), bias)
    for (row, column), values in (((0, 0), s11), ((0, 2), s12), ((2, 2), s22)):
        centre, plus, minus = values.reshape(3, points)
        matrix[:, row, column] += plus - centre
        matrix[:, row + 1, column + 1] += np.conj(minus - centre)


def _add_bias_reaction(
    matrix: ComplexArray, device: Device, bias: Bias, carrier: Carrier, offset_hz: FloatArray
) -> None:
    """The envelope moves the drain supply through the bias network, and the supply moves the carrier's output."""
    strength, weight1, weight2 = device.bias_reaction(bias.activity)
    if strength == 0:
        return
    frame = carrier.frame
    plus = frame * strength * carrier.coefficients.growth_at(abs(carrier.a1)) * device.baseband(offset_hz)
    minus = np.conj(frame) * np.conj(strength) * carrier.coefficients.growth_at(abs(carrier.a1))
    minus = minus * np.conj(device.baseband(-offset_hz))
    for column, weight in ((0, weight1), (2, weight2)):
        matrix[:, 2, column] += plus * weight * np.conj(frame)
        matrix[:, 2, column + 1] += plus * weight * frame
        matrix[:, 3, column] += minus * weight * np.conj(frame)
        matrix[:, 3, column + 1] += minus * weight * frame
