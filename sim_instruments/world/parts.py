"""Pads, cables, isolators and amplifiers as they really are: near their nominal values, with a gentle ripple."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, TypeVar

import numpy as np

from .keyed import angle_rad, normal, sign
from .levels import ComplexArray, FloatArray, delayed, root_watts, wave_ratio

Wave = TypeVar("Wave", complex, ComplexArray)

# Steepness of the amplifiers' knee (Rapp's p, doubled): y = g x / (1 + |g x / limit|^4)^(1/4).
_KNEE = 4.0


def nominal_loss_db(loss: float | Mapping[str, Sequence[float]], frequency_hz: FloatArray) -> FloatArray:
    """Loss of a part by its description, a number or a table; the table's ends hold beyond it."""
    if isinstance(loss, Mapping):
        return np.interp(frequency_hz, loss["frequency_hz"], loss["loss_db"]).astype(np.float64)
    return np.full(len(frequency_hz), float(loss))


class Ripple:
    """A small reflection's worth of ripple: 1 + r exp(-j 2 pi tau (f - centre) - j phi)."""

    def __init__(self, constants: Mapping[str, Any], seed: int, name: str, ripple_db: float) -> None:
        self._size = wave_ratio(ripple_db) - 1.0
        self._delay_s = constants["parts"]["ripple_delay_s"]
        self._centre_hz = constants["centre_hz"]
        self._angle_rad = angle_rad(seed, "ripple", name)

    def at(self, frequency_hz: FloatArray) -> ComplexArray:
        """Complex ratio at each frequency."""
        turn = 2.0 * np.pi * self._delay_s * (frequency_hz - self._centre_hz) + self._angle_rad
        ratio: ComplexArray = 1.0 + self._size * np.exp(-1j * turn)
        return ratio


class Part:
    """A linear part on the way of a signal, forward direction only."""

    def __init__(
        self, name: str, spec: Mapping[str, Any], constants: Mapping[str, Any], seed: int, *, at_receiver: bool = False
    ) -> None:
        self.name, self.spec = name, spec
        general = constants["parts"]
        self._ripple = Ripple(constants, seed, name, general["ripple_db"])
        self._delay_s = general["delay_s"]
        self._loss: float | Mapping[str, Sequence[float]] = spec.get("loss_db", 0.0)
        if spec["kind"] != "pad":
            self._error_db = general["loss_error_db"] * normal(seed, "loss", name)
        elif at_receiver:
            self._error_db = general["receiver_pad_error_db"] * sign(seed, "loss", name)
        else:
            self._error_db = general["pad_error_db"] * normal(seed, "loss", name)

    def transmission(self, frequency_hz: FloatArray) -> ComplexArray:
        """Wave ratio from one side to the other."""
        loss_db = nominal_loss_db(self._loss, frequency_hz) + self._error_db
        ratio: FloatArray = 10.0 ** (-loss_db / 20.0)
        return ratio * self._ripple.at(frequency_hz) * delayed(frequency_hz, self._delay_s)

    def carry(self, wave: Wave, transmission: Wave) -> Wave:
        """Return the wave behind the part."""
        return wave * transmission


class Amplifier(Part):
    """An amplifier that compresses smoothly: by the constants' 0.1 dB where its linear limit is."""

    def __init__(self, name: str, spec: Mapping[str, Any], constants: Mapping[str, Any], seed: int) -> None:
        super().__init__(name, spec, constants, seed)
        general = constants["parts"]
        self._gain_db = spec["gain_db"] + general["amplifier_gain_error_db"] * normal(seed, "gain", name)
        self._ripple = Ripple(constants, seed, name, general["amplifier_ripple_db"])
        compression = general["amplifier_compression_at_linear_limit_db"]
        excess = wave_ratio(_KNEE * compression) - 1.0
        self._limit = root_watts(spec.get("linear_dbm", 300.0) + compression) / excess ** (1.0 / _KNEE)

    def transmission(self, frequency_hz: FloatArray) -> ComplexArray:
        """Small-signal wave gain."""
        return wave_ratio(self._gain_db) * self._ripple.at(frequency_hz) * delayed(frequency_hz, self._delay_s)

    def carry(self, wave: Wave, transmission: Wave) -> Wave:
        """Return the amplified wave, compressed."""
        linear = wave * transmission
        compressed: Wave = linear / (1.0 + (abs(linear) / self._limit) ** _KNEE) ** (1.0 / _KNEE)
        return compressed


def make_part(
    name: str, spec: Mapping[str, Any], constants: Mapping[str, Any], seed: int, *, at_receiver: bool = False
) -> Part:
    """Build the part that a wiring describes."""
    if spec["kind"] == "amplifier":
        return Amplifier(name, spec, constants, seed)
    return Part(name, spec, constants, seed, at_receiver=at_receiver)


class Feed:
    """A source and the parts it passes before the coupler (or, without one, before the plane)."""

    def __init__(self, instrument: str, parts: Sequence[Part], constants: Mapping[str, Any], seed: int) -> None:
        self.instrument, self.parts = instrument, tuple(parts)
        source = constants["source"]
        self._error = wave_ratio(source["level_error_db"] * normal(seed, "level", instrument))
        self._ripple = Ripple(constants, seed, f"source {instrument}", source["ripple_db"])
        self._known: dict[bytes, tuple[ComplexArray, ...]] = {}

    def _transmissions(self, frequency_hz: FloatArray) -> tuple[ComplexArray, ...]:
        key = frequency_hz.tobytes()
        if key not in self._known:
            if len(self._known) > 2000:
                self._known.clear()
            own = self._error * self._ripple.at(frequency_hz)
            self._known[key] = (own, *(part.transmission(frequency_hz) for part in self.parts))
        return self._known[key]

    def waves(self, frequency_hz: FloatArray, level_dbm: FloatArray) -> list[ComplexArray]:
        """Waves along the feed: at the source's output, then behind each part. Root-watt."""
        own, *passed = self._transmissions(frequency_hz)
        along = [10.0 ** ((level_dbm - 30.0) / 20.0) * own]
        for part, transmission in zip(self.parts, passed, strict=True):
            along.append(part.carry(along[-1], transmission))
        return along
