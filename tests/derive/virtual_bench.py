"""A bench on paper, for derive's tests: waves at the plane, known exactly, and the readings that they give.

It is no world: no time, no heat, no damage. Its error terms, device and reflections are smooth made-up functions; what
it shares with derive is only the definition of a wave, written the other way round (from waves to raw readings).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from benchrun.contract.reading import Reading
from benchrun.derive.facts import BenchFacts
from benchrun.derive.linearity import Linearity, linearity_from
from benchrun.derive.results import Provenance
from benchrun.derive.standards import Definition, Standard

OFFSET_HZ = 7e6
DRIVES_DBM = np.arange(14.0, 31.0, 4.0)
CALIBRATION_GRID_HZ = np.linspace(2.18e9, 2.4e9, 89)
LEVELLING_GRID_HZ = np.linspace(2.19e9, 2.4e9, 22)
LEVELS_DBM = np.arange(-17.0, 4.0, 4.0)
HOT_GRID_HZ = np.linspace(2.2e9, 2.4e9, 21)
STANDARDS: dict[str, Definition] = {
    "open": Standard("open", delay_s=30e-12, capacitance=(50e-15, 0.0)),
    "short": Standard("short", delay_s=30e-12, inductance=(5e-12,)),
    "match": Standard("match"),
    "offset-short-1": Standard("short", delay_s=65e-12),
    "offset-short-2": Standard("short", delay_s=97e-12),
}
PROVENANCE = Provenance(
    "simulated, seed 1",
    "0.1.0",
    "On paper",
    "HD-31",
    "0042",
    "readings-hash",
    "schedule-hash",
    {"meter": "ACME,M1,1,0"},
)


@dataclass(frozen=True)
class VirtualBench:
    """Error terms and scale by frequency, receivers, and what stands in the device's place."""

    linearity: Linearity = field(default_factory=lambda: linearity_from(0.1, np.deg2rad(-0.39), -3.0))
    coherent: bool = True
    noise: float = 0.0
    seed: int = 0

    def terms(self, f):
        """(e00, e11, e10e01, K), complex, of raw reading against waves at the plane."""
        turn = np.exp(-2j * np.pi * f * 2.1e-9)
        tracking = 0.13 * (1 + 0.05 * np.exp(-2j * np.pi * f * 1.1e-9)) * turn
        e00 = tracking * (10 ** (-37 / 20) * np.exp(-2j * np.pi * f * 1.3e-9) + 0.004 * np.exp(2j * np.pi * f * 0.4e-9))
        e11 = 0.05 * np.exp(-2j * np.pi * f * 0.9e-9) + 0.025 * np.exp(-2j * np.pi * f * 3.4e-9)
        scale = 35.0 * (1 + 0.03 * np.cos(2 * np.pi * f * 1.7e-9))
        return e00, e11, tracking, scale

    def bench_reflection(self, f):
        """What the bench reflects towards the device's output."""
        return 0.05 * np.exp(-2j * np.pi * f * 1.7e-9) + 0.025 * np.exp(-2j * np.pi * f * 0.6e-9)

    def device(self, drive_dbm, f):
        """(B, S, T') of the device: B in root-watt; all move with drive and frequency."""
        x = (drive_dbm - 14.0) / 16.0
        a1 = np.sqrt(1e-3 * 10 ** (drive_dbm / 10)) * np.exp(-2j * np.pi * f * 4.2e-9)
        gain = 10 ** ((14.2 - 1.6 * x**2) / 20) * np.exp(-2j * np.pi * (f - 2.3e9) * 1e-9)
        s = (0.28 + 0.2 * x) * np.exp(1j * (0.7 + 0.5 * x) - 2j * np.pi * (f - 2.3e9) * 1.5e-9)
        t = 0.16 * x * np.exp(1j * (1.2 + x)) * np.exp(2j * np.angle(a1))
        return gain * a1, s, t

    def raw(self, b, a, f):
        """Return the linear receiver waves (reflected, incident) of waves b, a at the plane."""
        e00, e11, tracking, scale = self.terms(f)
        incident = (a - e11 * b) / scale
        return tracking * b / scale + e00 * incident, incident

    def read(self, tones: Mapping[str, np.ndarray], index: int) -> dict[str, np.ndarray]:
        """Return what one receiver says of its linear tones: compression on the envelope, then noise."""
        alone = len(tones) == 1
        seen = {k: self.linearity.distort(x) for k, x in tones.items()} if alone else self._many(tones)
        rng = np.random.default_rng((self.seed, index))
        return {k: x + self.noise * (rng.normal(size=x.shape) + 1j * rng.normal(size=x.shape)) for k, x in seen.items()}

    def _many(self, tones):
        """Several tones: y = x (1 - kappa |x|^2) on 16 samples of the envelope, then a Fourier transform."""
        t = np.arange(16)[:, None] / 16
        place = {"probe": 1, "pump": 0, "image": -1}
        x = sum(tones[k] * np.exp(2j * np.pi * place[k] * t) for k in tones)
        y = np.fft.fft(x * (1 - self.linearity.kappa * np.abs(x) ** 2), axis=0) / 16
        phase = np.exp(2j * np.array([0.3, 1.9, 4.4])) if not self.coherent else np.ones(3)
        return {k: y[place[k]] * phase[place[k]] for k in tones}

    def reading(self, name, index, conditions, waves, offsets_hz, frequencies_hz, scalars=None, attempt=1):
        """Return one reading of linear receiver waves {tone: (reflected, incident)}."""
        tones = tuple(waves)
        reflected = self.read({k: waves[k][0] for k in tones}, 2 * index)
        incident = self.read({k: waves[k][1] for k in tones}, 2 * index + 1)
        data = np.array([[incident[k], reflected[k]] for k in tones], dtype=complex)
        return Reading(
            index,
            name,
            attempt,
            conditions,
            tuple(frequencies_hz),
            tones,
            offsets_hz,
            ("incident", "reflected"),
            data,
            coherent=self.coherent,
            scalars=scalars or {},
            started_utc=f"2026-12-01T20:{index % 60:02d}:00+00:00",
        )

    def calibration_readings(self, standards=STANDARDS, actual=None) -> list[Reading]:
        """Return readings of each standard over the grid, at about -3 dBm; `actual` says what really is connected."""
        f = CALIBRATION_GRID_HZ
        readings = []
        for index, name in enumerate(standards):
            gamma = (actual or standards)[name].reflection(f)
            readings.append(self._passive("standard", index, f, gamma, {"standard": name, "connected.output": name}))
        return readings

    def power_readings(self, start=100, sensor=0.02) -> list[Reading]:
        """Return readings with the power meter connected, point by point: incident power at the plane, in dBm."""
        readings = []
        for index, f in enumerate(CALIBRATION_GRID_HZ):
            gamma = sensor * np.exp(-2j * np.pi * f * 1e-10)
            a = self._incident(np.array([f]), gamma)
            scalars = {"meter.power_dbm": float(10 * np.log10(abs(a[0]) ** 2 / 1e-3)), "ambient.temperature_degc": 23.5}
            conditions = {"frequency_hz": f, "connected.output": "meter"}
            readings.append(self._passive("power", start + index, np.array([f]), gamma, conditions, scalars))
        return readings

    def cold_reading(self, gamma, index=0, f=HOT_GRID_HZ) -> Reading:
        """Return a swept reading of a passive device of reflection `gamma`."""
        return self._passive("cold", index, f, gamma, {"connected.output": "device", "probe.level_dbm": -10.0})

    def _incident(self, f, gamma):
        probe = np.sqrt(0.5e-3) * np.exp(-2j * np.pi * f * 5e-9)
        return probe / (1 - self.bench_reflection(f) * gamma)

    def _passive(self, name, index, f, gamma, conditions, scalars=None):
        a = self._incident(f, gamma)
        waves = {"probe": self.raw(gamma * a, a, f)}
        return self.reading(name, index, conditions, waves, (0.0,), f, scalars)

    def hot_waves(self, drive_dbm, f):
        """Return {tone: (b, a, frequency)} at the plane, solved by iteration, and the truth (S, T')."""
        big, s, t = self.device(drive_dbm, f)
        up, mid, low = f, f - OFFSET_HZ, f - 2 * OFFSET_HZ
        probe = np.sqrt(0.5e-3) * np.exp(-2j * np.pi * f * 5e-9)
        b_up = b_low = b_mid = np.zeros_like(probe)
        for _ in range(25):
            a_up, a_low, a_mid = (
                probe + self.bench_reflection(up) * b_up,
                self.bench_reflection(low) * b_low,
                self.bench_reflection(mid) * b_mid,
            )
            b_up, b_low = s * a_up + t * np.conj(a_low), s * a_low + t * np.conj(a_up)
            b_mid = big + s * a_mid + t * np.conj(a_mid)
        return {"probe": (b_up, a_up, up), "pump": (b_mid, a_mid, mid), "image": (b_low, a_low, low)}, (s, t)

    def hot_readings(
        self, tones=("probe", "pump", "image"), drives=DRIVES_DBM, grid=HOT_GRID_HZ, start=0
    ) -> list[Reading]:
        """Return one reading for each drive and frequency, in the order of the schedule."""
        offsets = {"probe": 0.0, "pump": -OFFSET_HZ, "image": -2 * OFFSET_HZ}
        readings = []
        for drive in drives:
            for f in grid:
                waves, _ = self.hot_waves(drive, np.array([f]))
                raw = {k: self.raw(*waves[k]) for k in tones}
                conditions = {
                    "drive_dbm": float(drive),
                    "frequency_hz": float(f),
                    "probe.frequency_hz": float(f),
                    "pump.frequency_hz": float(f - OFFSET_HZ),
                    "pump.level_dbm": float(drive - 29.6 + 1e-10 * (f - 2.3e9)),
                    "probe.level_dbm": 8.0,
                    "connected.output": "device",
                }
                scalars = {"drain.voltage_v": 28.0, "drain.current_a": 0.35 + 0.01 * (drive - 14.0)}
                where = tuple(offsets[k] for k in tones)
                readings.append(self.reading("hot", start + len(readings), conditions, raw, where, (f,), scalars))
        return readings

    def levelling_readings(self, levels=LEVELS_DBM, grid=LEVELLING_GRID_HZ) -> list[Reading]:
        """Return scalar readings of the power meter at the input plane."""
        readings = []
        for level in levels:
            for f in grid:
                conditions = {"pump.level_dbm": float(level), "frequency_hz": float(f), "pump.frequency_hz": float(f)}
                readings.append(
                    Reading(
                        len(readings), "levelling", 1, conditions, (float(f),), ("pump",), (0.0,), (),
                        np.zeros((1, 0, 1), complex), scalars={"meter.power_dbm": float(self.power_at_input(level, f))},
                        started_utc="2026-12-01T19:00:00+00:00",
                    )
                )  # fmt: skip
        return readings

    @staticmethod
    def power_at_input(level_dbm, f):
        """A chain of about 29.6 dB that compresses softly and ripples a little."""
        out = level_dbm + 29.6 + 0.4 * np.cos(2 * np.pi * f * 6e-9)
        return out - 0.3 * 10 ** ((out - 33.0) / 10)

    def facts(self, plane: str) -> BenchFacts:
        """Return what the bench file would say."""
        both = {"incident": self.linearity, "reflected": self.linearity}
        parts = {"coupler": "20 dB coupler", "P3": "10 dB pad"}
        return BenchFacts(
            plane, "reflected", "incident", both, -17.0, -22.0, 10 ** (-22 / 20), 0.2, f"hash-{plane}", parts
        )


def ideal_receivers(bench: VirtualBench) -> VirtualBench:
    """Return the same bench with receivers that never compress."""
    return replace(bench, linearity=Linearity(0j, np.inf))
