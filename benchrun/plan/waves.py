"""The levels of a bench at many conditions at once: both sides of the device, and the device between them.

All are worst cases over the phases of reflections. What the bench file says of the device is taken as the largest that
is to be expected; its input, of which the file says nothing, is taken to reflect everything.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from benchrun.bench import Bench
from benchrun.contract.capture import FloatArray
from benchrun.plan.decibels import loop_db, saturated_dbm
from benchrun.plan.figure import Figure, Limit
from benchrun.plan.side import Side, Tone

Flags = npt.NDArray[np.bool_]
INPUT, OUTPUT = "input", "output"
POWER_UP = "power-up"


@dataclass(frozen=True, slots=True)
class Setting:
    """One signal at N conditions: level (dBm) and frequency (Hz), NaN where not set, and whether it is on."""

    level_dbm: FloatArray
    frequency_hz: FloatArray
    on: Flags

    @property
    def sent_dbm(self) -> FloatArray:
        """The level where the signal is on, NaN elsewhere."""
        return np.where(self.on, self.level_dbm, np.nan)


@dataclass(frozen=True, slots=True)
class Conditions:
    """N conditions. `drive_dbm`: NaN where none is in force. `connected`: by plane and what, where (N,) it is there."""

    settings: Mapping[str, Setting]
    drive_dbm: FloatArray
    connected: Mapping[str, Mapping[str, Flags]]

    def has(self, plane: str, what: str) -> Flags:
        """Return where something is connected to a plane."""
        nowhere = np.zeros(self.drive_dbm.shape, dtype=np.bool_)
        return self.connected.get(plane, {}).get(what, nowhere)


class BenchLevels:
    """Works out the levels of one bench."""

    def __init__(self, bench: Bench) -> None:
        self.bench, self.device = bench, bench.device
        self.sides: dict[str, Side] = {
            signal.plane: Side(bench, signal.plane, name) for name, signal in bench.signals.items()
        }
        self._meters = {n: one.sensor for n, one in bench.instruments.items() if one.sensor is not None}

    def figures(self, conditions: Conditions) -> Iterator[Figure]:
        """Yield every level."""
        for side in self.sides.values():
            setting = conditions.settings[side.signal]
            yield Figure(f"{side.signal} output", side.signal, setting.level_dbm, self._most_sent(side))
            yield from side.outward(setting.sent_dbm, setting.frequency_hz)
        tones = self._tones(conditions)
        for plane, there in tones.items():
            side = self.sides[plane]
            for tone in there:
                yield from self._device_figures(conditions, side, tone)
                yield from side.inward(tone)
                yield from side.meters({name: conditions.has(plane, name) for name in self._meters}, tone)

    def _most_sent(self, side: Side) -> Limit | None:
        instrument = self.bench.instruments[side.instrument]
        tops = [top for top in (instrument.ceiling, (instrument.limits.level or (None, None))[1]) if top is not None]
        return Limit("maximum", min(tops)) if tops else None

    def _device_figures(self, conditions: Conditions, side: Side, tone: Tone) -> Iterator[Figure]:
        """Yield the level at the device's connector: what enters its input, what leaves or enters its output."""
        maximum = self.device.maximum
        there = conditions.has(side.plane, "device")
        if side.plane == INPUT:
            level, limit = tone.toward_dbm, maximum.input
        else:
            level, limit = np.fmax(tone.away_dbm, tone.toward_dbm), maximum.output
        yield Figure(f"device {side.plane}", tone.name, np.where(there, level, np.nan), Limit("maximum", limit))

    # Waves at the planes

    def _tones(self, conditions: Conditions) -> dict[str, list[Tone]]:
        """Return the waves of every tone at each plane: the plane's own signal, then what the device passes on."""
        own = {plane: self._own(conditions, side) for plane, side in self.sides.items()}
        tones = {plane: [tone] for plane, tone in own.items()}
        both = conditions.has(INPUT, "device") & conditions.has(OUTPUT, "device")
        for plane, passed_on in ((OUTPUT, self._forward), (INPUT, self._backward)):
            other = OUTPUT if plane == INPUT else INPUT
            if plane in own and other in own:
                tones[plane].append(passed_on(own[other], both, self.sides[plane]))
        return tones

    def _own(self, conditions: Conditions, side: Side) -> Tone:
        """Return the waves of a plane's own signal: it arrives, and what is connected reflects it."""
        setting = conditions.settings[side.signal]
        arriving = side.at_plane(setting.sent_dbm, setting.frequency_hz)
        if side.plane == INPUT:
            arriving = np.where(np.isnan(conditions.drive_dbm) | ~setting.on, arriving, conditions.drive_dbm)
        reflection = self._reflection(conditions, side.plane)
        toward = arriving + loop_db(side.match, reflection)
        with np.errstate(divide="ignore"):
            return Tone(side.signal, setting.frequency_hz, toward, toward + 20.0 * np.log10(reflection))

    def _reflection(self, conditions: Conditions, plane: str) -> FloatArray:
        """Return the largest magnitude that what is connected to a plane reflects: a standard, everything."""
        found = np.ones(conditions.drive_dbm.shape)
        for name, sensor in self._meters.items():
            found[conditions.has(plane, name)] = sensor.reflection
        if plane == OUTPUT:
            found[conditions.has(plane, "device")] = self._output_reflection
        return found

    @property
    def _output_reflection(self) -> float:
        return min(self.device.reflection + self.device.conversion, 1.0)

    def _forward(self, tone: Tone, both: Flags, side: Side) -> Tone:
        """Return what the device makes of its input at its output."""
        output = saturated_dbm(tone.toward_dbm, self.device.gain, self.device.saturation)
        away = np.where(both, output + loop_db(side.match, self._output_reflection), np.nan)
        return Tone(tone.name, tone.frequency_hz, away + 20.0 * np.log10(side.match), away)

    def _backward(self, tone: Tone, both: Flags, side: Side) -> Tone:
        """Return what leaks back through the device to its input: |S12| from |S12 S21| and the gain."""
        away = tone.toward_dbm + self.device.return_gain - self.device.gain + loop_db(side.match, 1.0)
        away = np.where(both, away, np.nan)
        return Tone(tone.name, tone.frequency_hz, away + 20.0 * np.log10(side.match), away)

    # After a power-up or a preset

    def power_up_figures(self, conditions: Conditions) -> Iterator[Figure]:
        """Yield what an analyser's port sends after a power-up or a preset, at the device and at receivers."""
        for side in self.sides.values():
            port = self.bench.instruments[side.instrument].source_port
            if port is None:
                continue
            setting = conditions.settings[side.signal]
            level = np.full(setting.level_dbm.shape, port.power_up)
            up = Setting(level, setting.frequency_hz, np.ones(level.shape, dtype=np.bool_))
            alone = replace(conditions, settings={side.signal: up}, drive_dbm=np.full(level.shape, np.nan))
            tone = self._own(alone, side)
            for figure in (*self._device_figures(conditions, side, tone), *side.inward(tone)):
                harmful = figure.limit is not None and figure.limit.kind in ("damage", "maximum")
                if harmful and (figure.receiver or figure.plane.startswith("device")):
                    yield replace(figure, tone=POWER_UP, note=f"{side.instrument} after a power-up or a preset")
