"""What a wave receiver makes of the waves at its inputs: compression, crosstalk, drift, filters, noise, phase.

Arrays are (tones, receivers, points). Some tones are present at the inputs; the tunings are those that are asked for.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from .imperfections import Imperfections
from .keyed import Key, complex_normals, normal, phasor, sign, stream
from .levels import BoolArray, ComplexArray, FloatArray, dbm, power_ratio, wave_ratio

# Order of the tones that can be present: the image, the pump, the probe.
IMAGE, PUMP, PROBE = 0, 1, 2
_SAME_HZ = 1.0


@dataclass(frozen=True, slots=True)
class Filter:
    """How a capture is filtered."""

    if_bandwidth_hz: float
    averages: int

    @property
    def noise_bandwidth_hz(self) -> float:
        """Bandwidth that the averages leave."""
        return self.if_bandwidth_hz / self.averages


@dataclass(frozen=True, slots=True)
class Incoming:
    """What stands at the inputs: tones (3, W, P) at frequencies (3, P), and the skirt's path and level.

    `skirt` is the wave (W, P) that a unit of noise-to-carrier ratio at the device's output makes at the inputs.
    """

    waves: ComplexArray
    frequencies_hz: FloatArray
    skirt: ComplexArray


def kappa_per_w(constants: Mapping[str, Any]) -> complex:
    """kappa of y = x (1 - kappa |x|^2): k (1 + j r), with k from the quoted loss at the quoted level."""
    own = constants["receiver"]
    power_w = power_ratio(own["compression_at_dbm"] - 30.0)
    ratio = own["kappa_imaginary_ratio"]
    remaining = power_ratio(-own["compression_db"])
    # |1 - k P (1 + j r)|^2 = remaining, the smaller root.
    a, b, c = 1.0 + ratio**2, -2.0, 1.0 - remaining
    k = (-b - math.sqrt(b * b - 4.0 * a * c)) / (2.0 * a * power_w)
    return float(k) * complex(1.0, ratio)


def intermodulate(waves: ComplexArray, kappa: complex) -> ComplexArray:
    """y = x (1 - kappa |x|^2) for the sum x of three tones at equal distances, as it stands at each of the three.

    `waves`: (3, ...) in the order image, pump, probe. Every product i + j - l that falls on a tone is counted. Products
    that fall beside the three tones are left out.
    """
    image, pump, probe = waves
    power = np.abs(waves) ** 2
    total = power.sum(axis=0)
    cubed = np.empty_like(waves)
    cubed[IMAGE] = image * (2.0 * total - power[IMAGE]) + pump**2 * np.conj(probe)
    cubed[PUMP] = pump * (2.0 * total - power[PUMP]) + 2.0 * image * probe * np.conj(pump)
    cubed[PROBE] = probe * (2.0 * total - power[PROBE]) + pump**2 * np.conj(image)
    return waves - kappa * cubed


def ambient_k(constants: Mapping[str, Any], time_ns: int) -> float:
    """Swing of the ambient temperature about its mean."""
    time_s = time_ns * 1e-9
    return math.fsum(
        swing["amplitude_k"] * math.sin(2.0 * math.pi * time_s / swing["period_s"] + swing["phase_rad"])
        for swing in constants["ambient"]["swings"]
    )


class Receivers:
    """The receivers of one instrument, by their labels."""

    def __init__(
        self,
        instrument: str,
        connected: Sequence[str],
        constants: Mapping[str, Any],
        seed: int,
        imperfections: Imperfections,
    ) -> None:
        self._instrument, self._connected, self._seed, self._on = instrument, tuple(connected), seed, imperfections
        self._own = constants["receiver"]
        self.kappa = kappa_per_w(constants) if imperfections.compression else 0j
        self._drift_side = 0.5 * sign(seed, "drift", instrument)
        self._gains: dict[str, complex] = {}
        self._mixing: dict[tuple[str, ...], ComplexArray] = {}
        source = constants["source"]
        self._skirt_log_hz = np.log10(source["skirt_offset_hz"])
        self._skirt_db = np.asarray(source["skirt_dbc_per_hz"])

    def gain(self, label: str) -> complex:
        """Fixed gain of a receiver: a little off in level, anywhere in phase."""
        if label not in self._gains:
            error_db = self._own["gain_error_db"] * normal(self._seed, "receiver", self._instrument, label)
            self._gains[label] = wave_ratio(error_db) * phasor(self._seed, "receiver phase", self._instrument, label)
        return self._gains[label]

    def drift(self, label: str, change_k: float) -> complex:
        """Drift since time 0 for a change of the ambient temperature: common to all receivers, and between them."""
        own = self._own
        place = self._connected.index(label) if label in self._connected else 0
        side = self._drift_side * (-1.0) ** place
        gain_db = own["gain_drift_common_db_per_k"] + side * own["gain_drift_between_db_per_k"]
        angle_deg = own["phase_drift_common_deg_per_k"] + side * own["phase_drift_between_deg_per_k"]
        angle_rad = math.radians(angle_deg * change_k)
        return wave_ratio(gain_db * change_k) * complex(math.cos(angle_rad), math.sin(angle_rad))

    def skirt_ratio(self, offset_hz: FloatArray, bandwidth_hz: float) -> FloatArray:
        """Wave ratio of the pump's noise in a bandwidth to the pump, log-interpolated (METHODS section 5)."""
        distance = np.clip(np.abs(offset_hz), 1e-3, None)
        level_db = np.interp(np.log10(distance), self._skirt_log_hz, self._skirt_db)
        ratio: FloatArray = 10.0 ** ((level_db + 10.0 * math.log10(bandwidth_hz)) / 20.0)
        return ratio

    def _rejection(self, distance_hz: FloatArray, if_bandwidth_hz: float) -> FloatArray:
        """Wave ratio that the IF filter leaves of a tone at a distance from the tuning."""
        relative = np.maximum(np.abs(distance_hz) / if_bandwidth_hz, 1.0)
        own = self._own
        loss_db = np.minimum(own["if_rejection_slope_db"] * np.log10(relative), own["if_rejection_limit_db"])
        left: FloatArray = 10.0 ** (-loss_db / 20.0)
        return left

    def _crossed(self, waves: ComplexArray, labels: Sequence[str]) -> ComplexArray:
        """Every receiver hears the others a little."""
        if not self._on.crosstalk or len(labels) < 2:
            return waves
        key = tuple(labels)
        if key not in self._mixing:
            size = wave_ratio(self._own["crosstalk_db"])
            leak = [
                [phasor(self._seed, "crosstalk", self._instrument, one, other) for other in labels] for one in labels
            ]
            same = np.eye(len(labels), dtype=np.complex128)
            self._mixing[key] = same + size * np.array(leak) * (1.0 - same)
        mixed: ComplexArray = self._mixing[key] @ waves
        return mixed

    def read(
        self,
        labels: Sequence[str],
        incoming: Incoming,
        tuned_hz: FloatArray,
        how: Filter,
        *,
        coherent: bool,
        change_k: float,
        key: tuple[Key, ...],
    ) -> ComplexArray:
        """Readings (T, W, P) at the tunings (T, P)."""
        random = stream(self._seed, self._instrument, *key)
        tones, receivers, points = len(tuned_hz), len(labels), tuned_hz.shape[1]
        heard = intermodulate(self._crossed(incoming.waves, labels), self.kappa)
        distance = tuned_hz[:, None, :] - incoming.frequencies_hz[None, :, :]
        through = np.where(np.abs(distance) < _SAME_HZ, 1.0 + 0j, 0j)
        noise = complex_normals(random, 2, tones, receivers, points)
        turns = np.exp(2j * np.pi * random.random((4, tones, points)))
        if self._on.skirt:
            # A tone beside the tuning leaves a residue that turns by unknown angles from one average to the next.
            residue = (
                self._rejection(distance, how.if_bandwidth_hz) / math.sqrt(how.averages) * turns[:3].swapaxes(0, 1)
            )
            through = np.where(through == 0j, residue, through)
        readings: ComplexArray = np.einsum("ktp,twp->kwp", through, heard)
        if self._on.skirt:
            readings = readings + self._skirt_noise(random, incoming, distance[:, PUMP], how)
        if self._on.noise:
            size = self._own["multiplicative_noise_in_1khz"] * math.sqrt(how.noise_bandwidth_hz / 1e3)
            readings = readings * (1.0 + size * noise[0])
        readings = readings * np.array([self._response(label, change_k) for label in labels])[None, :, None]
        if self._on.noise:
            floor_dbm = self._own["floor_dbm_in_1khz"] + 10.0 * math.log10(how.noise_bandwidth_hz / 1e3)
            readings = readings + wave_ratio(floor_dbm - 30.0) * noise[1]
        if not coherent:
            # Retuned receivers start each tone anew: its phase is common to its waves, and unknown to the other tones.
            readings = readings * turns[3][:, None, :]
        return readings

    def _skirt_noise(
        self, random: np.random.Generator, incoming: Incoming, offset_hz: FloatArray, how: Filter
    ) -> ComplexArray:
        """The pump's noise at each tuning; on the pump itself it is part of the carrier."""
        ratio = self.skirt_ratio(offset_hz, how.noise_bandwidth_hz)
        ratio = np.where(np.abs(offset_hz) > how.if_bandwidth_hz, ratio, 0.0)
        noise: ComplexArray = (ratio * complex_normals(random, *offset_hz.shape))[:, None, :] * incoming.skirt[
            None, :, :
        ]
        return noise

    def _response(self, label: str, change_k: float) -> complex:
        return self.gain(label) * (self.drift(label, change_k) if self._on.drift else 1.0)

    def over_limit(self, labels: Sequence[str], incoming: Incoming, limit_dbm: float) -> BoolArray:
        """Flags (W,): the total power at an input was above the limit at any point."""
        flags: BoolArray = np.any(self.input_power_w(incoming) > power_ratio(limit_dbm - 30.0), axis=1)
        return flags[: len(labels)]

    @staticmethod
    def input_power_w(incoming: Incoming) -> FloatArray:
        """Total power (W, P) at the inputs."""
        total: FloatArray = (np.abs(incoming.waves) ** 2).sum(axis=0)
        return total


def highest_dbm(power_w: FloatArray) -> float:
    """Highest of some powers, in dBm."""
    return dbm(float(power_w.max(initial=0.0)))
