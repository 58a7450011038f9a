"""One side of the device: the source behind it, the coupler if there is one, and the receivers at the coupler's arms.

Waves at a plane: `a` towards the device, `b` away from it. At each frequency the linear side is

    a = reflection b + transfer s            s: the wave that the feed delivers
    x = toward a + away b                    x: the wave at a receiver's input

so the readings of two receivers at one coupler are a linear map of (a, b), whatever the source and its match: the
one-port error model holds exactly, with e11 = -Qr/Pr, e00 = Pm/Pr, e10e01 = Qm/Pr + e00 e11, and a = r/Pr where b is 0.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from .keyed import complex_normal, normal, phasor
from .levels import ComplexArray, FloatArray, delayed, wave_ratio
from .parts import Feed, Part, Ripple, make_part

Pair = tuple[ComplexArray, ComplexArray]


@dataclass(frozen=True, slots=True)
class SideNetwork:
    """The linear side at some frequencies, seen from the device; arrays over frequency."""

    reflection: ComplexArray
    transfer: ComplexArray
    toward: Mapping[str, ComplexArray]
    away: Mapping[str, ComplexArray]

    def behind(self, joint: ComplexArray) -> SideNetwork:
        """Seen through a lossless joint with S11 = joint (on the bench's side), S22 = -joint*."""
        through = np.sqrt(1.0 - np.abs(joint) ** 2)
        back = -np.conj(joint)
        loop = 1.0 - self.reflection * joint
        toward, away = {}, {}
        for name in self.toward:
            p, q = self.toward[name], self.away[name]
            toward[name] = (p + q * joint) / through
            away[name] = q * through - (p + q * joint) * back / through
        reflection = through**2 * self.reflection / loop + back
        return SideNetwork(reflection, through * self.transfer / loop, toward, away)

    def part(self, index: slice) -> SideNetwork:
        """Return the same for some of the frequencies."""
        return SideNetwork(
            self.reflection[index],
            self.transfer[index],
            {name: values[index] for name, values in self.toward.items()},
            {name: values[index] for name, values in self.away.items()},
        )


@dataclass(frozen=True, slots=True)
class Arm:
    """A receiver at an arm of the side's coupler."""

    instrument: str
    label: str
    samples_incident: bool
    parts: tuple[Part, ...]


class Coupler:
    """Dual directional coupler with an adapter at its device side, as a signal flow (see `combinations`)."""

    def __init__(
        self,
        name: str,
        spec: Mapping[str, Any],
        constants: Mapping[str, Any],
        seed: int,
        beyond: Sequence[Part] = (),
    ) -> None:
        self.name, self.spec = name, spec
        own = constants["coupler"]
        self._own, self._beyond = own, tuple(beyond)
        self._main = Part(name, {"kind": "coupler", "loss_db": spec.get("loss_db", own["loss_db"])}, constants, seed)
        self._coupling = spec.get("coupling_db", own["coupling_db"])
        self._directivity = wave_ratio(-spec.get("directivity_db", own["directivity_db"]))
        self._leak_phasor = {arm: phasor(seed, "directivity", name, arm) for arm in ("incident", "reflected")}
        self._line_phasor = {end: phasor(seed, "main line", name, end) for end in ("source", "device")}
        self._adapter_phasor = phasor(seed, "adapter", name)
        error_db = own["coupling_error_db"]
        self._error_db = {arm: error_db * normal(seed, "coupling", name, arm) for arm in ("incident", "reflected")}
        self._ripple = {
            arm: Ripple(constants, seed, f"{name} {arm}", own["coupling_ripple_db"])
            for arm in ("incident", "reflected")
        }

    def _arm(self, arm: str, frequency_hz: FloatArray) -> ComplexArray:
        ratio = wave_ratio(-self._coupling + self._error_db[arm])
        return ratio * self._ripple[arm].at(frequency_hz) * delayed(frequency_hz, self._own["arm_delay_s"][arm])

    def _leak(self, arm: str, frequency_hz: FloatArray) -> ComplexArray:
        return self._directivity * self._leak_phasor[arm] * delayed(frequency_hz, self._own["directivity_delay_s"])

    def _adapter(self, frequency_hz: FloatArray) -> tuple[ComplexArray, ComplexArray, ComplexArray]:
        """S11 (coupler's side), S21 = S12, S22 (plane's side) of a lossless adapter and the parts beyond it."""
        size = wave_ratio(self._own["adapter_reflection_db"])
        delay = delayed(frequency_hz, self._own["adapter_delay_s"])
        near = size * self._adapter_phasor * delay
        through = np.sqrt(1.0 - size**2) * delay
        far = -np.conj(near) * through / np.conj(through)
        for part in self._beyond:
            passed = part.transmission(frequency_hz)
            through, far = through * passed, far * passed**2
        return near, through, far

    def combinations(self, frequency_hz: FloatArray) -> dict[str, Pair]:
        """Waves inside, as pairs (p, q) of p a + q b with the plane's waves a and b.

        Keys: "source in" and "source out" at the coupler's source end, "incident" and "reflected" at the arms.
        """
        near, through, far = self._adapter(frequency_hz)
        out = (1.0 / through, -far / through)  # leaves the coupler towards the adapter
        back = (near / through, through - near * far / through)  # comes back from the adapter
        main = self._main.transmission(frequency_hz)
        line = wave_ratio(self._own["main_line_reflection_db"]) * delayed(frequency_hz, self._own["main_line_delay_s"])
        device_end, source_end = (line * self._line_phasor[end] for end in ("device", "source"))
        source_in = _sum((out, 1.0 / main), (back, -device_end / main))
        return {
            "source in": source_in,
            "source out": _sum((back, main), (source_in, source_end)),
            "incident": _scaled(
                _sum((source_in, 1.0), (back, self._leak("incident", frequency_hz))),
                self._arm("incident", frequency_hz),
            ),
            "reflected": _scaled(
                _sum((back, 1.0), (source_in, self._leak("reflected", frequency_hz))),
                self._arm("reflected", frequency_hz),
            ),
        }


def _scaled(pair: Pair, factor: ComplexArray) -> Pair:
    return pair[0] * factor, pair[1] * factor


def _sum(first: tuple[Pair, ComplexArray | float], second: tuple[Pair, ComplexArray | float]) -> Pair:
    (one, one_factor), (other, other_factor) = first, second
    return one[0] * one_factor + other[0] * other_factor, one[1] * one_factor + other[1] * other_factor


class Side:
    """What stands at one plane of the device."""

    def __init__(self, plane: str, wiring: Mapping[str, Any], constants: Mapping[str, Any], seed: int) -> None:
        self.plane, self._constants, self._seed = plane, constants, seed
        signal = next((signal for signal in wiring["signals"].values() if signal["plane"] == plane), None)
        path: Sequence[str] = signal["path"] if signal else ()
        parts = wiring.get("parts", {})
        made = {name: make_part(name, parts[name], constants, seed) for name in path}
        at = next((index for index, name in enumerate(path) if parts[name]["kind"] == "coupler"), len(path))
        self.coupler: Coupler | None = None
        if at < len(path):
            beyond = [made[name] for name in path[at + 1 :]]
            self.coupler = Coupler(path[at], parts[path[at]], constants, seed, beyond)
        feed_parts = [made[name] for name in path[:at]]
        self.feed = Feed(signal["instrument"] if signal else "", feed_parts, constants, seed)
        self.arms = {
            name: Arm(
                spec["instrument"],
                spec["receiver"],
                spec["arm"] == "incident",
                tuple(make_part(part, parts[part], constants, seed, at_receiver=True) for part in spec["path"]),
            )
            for name, spec in wiring.get("receivers", {}).items()
            if self.coupler is not None and spec["coupler"] == self.coupler.name
        }
        self._known: dict[tuple[int, bytes], SideNetwork] = {}

    def own_reflection(self, frequency_hz: FloatArray) -> ComplexArray:
        """What the bench reflects to the device, by the constants of the world."""
        terms = self._constants["bench_reflection"].get(self.plane, self._constants["bench_reflection"]["output"])
        total = np.zeros(len(frequency_hz), dtype=np.complex128)
        for term in terms:
            total += wave_ratio(term["level_db"]) * delayed(frequency_hz, term["delay_s"])
        return total

    def joint(self, frequency_hz: FloatArray, mating: int) -> ComplexArray:
        """Reflection of the connection made at the mating with this number."""
        size = self._constants["connection_repeatability"]
        error = size * complex_normal(self._seed, "mating", self.plane, mating)
        turned: ComplexArray = error * delayed(frequency_hz - self._constants["centre_hz"], 0.3e-9)
        return turned

    def ideal_network(self, frequency_hz: FloatArray) -> SideNetwork:
        """The side with a perfect connection: what a calibration is after."""
        reflection = self.own_reflection(frequency_hz)
        if self.coupler is None:
            return SideNetwork(reflection, np.ones_like(reflection), {}, {})
        inside = self.coupler.combinations(frequency_hz)
        source_in, source_out = inside["source in"], inside["source out"]
        # The match behind the coupler is what makes the whole side reflect as the constants say.
        match = (source_in[0] * reflection + source_in[1]) / (source_out[0] * reflection + source_out[1])
        toward, away = {}, {}
        for name, arm in self.arms.items():
            path = np.ones_like(reflection)
            for part in arm.parts:
                path = path * part.transmission(frequency_hz)
            pair = inside["incident" if arm.samples_incident else "reflected"]
            toward[name], away[name] = pair[0] * path, pair[1] * path
        return SideNetwork(reflection, 1.0 / (source_in[0] - match * source_out[0]), toward, away)

    def network(self, frequency_hz: FloatArray, mating: int) -> SideNetwork:
        """The side as the device sees it through the present connection."""
        key = mating, frequency_hz.tobytes()
        if key not in self._known:
            if len(self._known) > 4000:
                self._known.clear()
            ideal = self.ideal_network(frequency_hz)
            self._known[key] = ideal.behind(self.joint(frequency_hz, mating))
        return self._known[key]
