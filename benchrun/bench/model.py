"""The bench: instruments, parts, and how they are connected, plane by plane. What a *.bench.yaml file says."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import Field, PrivateAttr

from benchrun.bench import hashing, names, wiring
from benchrun.bench.instruments import Instrument
from benchrun.bench.kit import Kit
from benchrun.bench.parts import Coupler, Part
from benchrun.bench.ranges import Fraction, PositiveCurrent, PositiveVoltage, VoltageRange
from benchrun.contract.kinds import Readable, Settable
from benchrun.contract.roles import ROLES
from benchrun.fields import Count, FilePath, Form, Level, Name, Ratio, Text, Voltage
from benchrun.yaml_source import Strict

Plane = Literal["input", "output"]
PLANES: tuple[Plane, ...] = ("input", "output")
#: The signal that reaches this plane carries the drive.
DRIVE_PLANE: Plane = "input"


class Visa(Strict):
    """Which VISA is used: never a library's path."""

    backend: Annotated[str, Form(r"[a-z][a-z0-9_]*", "the name of a VISA backend, such as py")] = "py"


class Signal(Strict):
    """A signal: the instrument it comes from, and the parts it passes, in order, on its way to a plane."""

    instrument: Name
    path: tuple[Name, ...] = ()
    plane: Plane


class Receiver(Strict):
    """A receiver: one arm of a coupler, the parts behind it, and the receiver of an instrument."""

    instrument: Name
    receiver: Name = Field(description="the instrument's own name for it", examples=["R4"])
    coupler: Name
    arm: Literal["incident", "reflected"]
    path: tuple[Name, ...] = ()


class Bias(Strict):
    """One output of a supply, and what it may never exceed."""

    instrument: Name
    channel: Annotated[Count, Field(ge=1)]
    voltage: VoltageRange
    current_limit: PositiveCurrent
    over_voltage: PositiveVoltage = Field(description="over-voltage trip, a magnitude")
    pinch_off: Voltage | None = Field(None, description="gate voltage at which no drain current flows")
    released_below: PositiveVoltage | None = Field(None, description="the drain counts as off below this")


class Maximum(Strict):
    """Levels at the device's connectors that are never exceeded."""

    input: Level
    output: Level


class Device(Strict):
    """How the device is expected to behave, for the level check: worst cases."""

    gain: Ratio = Field(description="small signal")
    saturation: Level = Field(description="saturated output power")
    reflection: Fraction = Field(description="largest reflection expected at its output")
    conversion: Fraction = Field(description="largest |T22| expected")
    return_gain: Ratio = Field(description="largest |S12 S21| expected")
    input_match: Ratio = Field(lt=0.0, description="reflection of the bench, seen from the device's input")
    output_match: Ratio = Field(lt=0.0, description="reflection of the bench, seen from the device's output")
    maximum: Maximum


class Rehearsal(Strict):
    """How a rehearsal assumes the world to be: its name, and imperfections that are switched off."""

    world: Name = "R1"
    kit: FilePath | None = Field(None, description="kit file that the simulated operator has at hand")
    thermal_memory: bool = True
    noise: bool = True
    drift: bool = True
    definitions: bool = True
    repeatability: bool = True
    compression: bool = True
    crosstalk: bool = True
    skirt: bool = True
    bias_resonance: bool = True
    dispersion: bool = True
    second_order: bool = True
    meter_error: bool = True


class Bench(Strict):
    """A *.bench.yaml file. Quantities are SI floats; levels in dBm and ratios in dB."""

    benchrun: Literal[1]
    title: Text
    interlock: Text | None = Field(None, description="the hardware interlock; software is none")
    visa: Visa = Visa()
    instruments: dict[Name, Instrument] = Field(min_length=1)
    parts: dict[Name, Part] = Field(default={})
    signals: dict[Name, Signal] = Field(min_length=1)
    receivers: dict[Name, Receiver] = Field(default={})
    bias: dict[Name, Bias] = Field(default={})
    device: Device
    rehearsal: Rehearsal | None = None
    simulated: bool = Field(False, description="true where the addresses are those of a served simulation")
    rehearsal_channel: Annotated[str, Form(r"[^\s:]+:[0-9]{1,5}", "an address, host:port")] | None = None
    _path: Path = PrivateAttr(default=Path("bench.yaml"))
    _text: str = PrivateAttr(default="")
    _roles: Mapping[str, str] = PrivateAttr(default_factory=dict)
    _files: Mapping[str, str] = PrivateAttr(default_factory=dict)

    def remember(self, path: Path, text: str, roles: Mapping[str, str], files: Mapping[str, str]) -> None:
        """Keep where the bench came from and which driver has which role; for the loader."""
        self._path, self._text, self._roles, self._files = path, text, roles, files

    @property
    def path(self) -> Path:
        """The bench file."""
        return self._path

    @property
    def text(self) -> str:
        """The bench file as read."""
        return self._text

    @property
    def files(self) -> Mapping[str, str]:
        """Texts of the Touchstone files that the bench names, by name."""
        return self._files

    @property
    def coherent(self) -> bool:
        """Whether the receivers capture all tones of a point at one instant."""
        return any(instrument.tones == "coherent" for instrument in self.instruments.values())

    @property
    def drive_signal(self) -> str | None:
        """Name of the signal that reaches the device's input, None where there is none."""
        return next((name for name, signal in self.signals.items() if signal.plane == DRIVE_PLANE), None)

    def role(self, instrument: str) -> str:
        """Return the role of an instrument ("signal-source"), "" where it is not known."""
        driver = self.instruments[instrument].driver
        return self._roles.get(driver, driver if driver in ROLES else "")

    def dialect_path(self, instrument: str) -> Path | None:
        """Return the whole path of an instrument's dialect file, None where it has none."""
        dialect = self.instruments[instrument].dialect
        return self._path.parent / dialect if dialect else None

    def coupler(self, name: str) -> Coupler:
        """Return a part that is a coupler."""
        part = self.parts[name]
        if not isinstance(part, Coupler):
            raise TypeError(f"{name} is no coupler")
        return part

    def settables(self) -> dict[str, Settable]:
        """Return what can be set, by full name ("pump.level", "drain.voltage", "drive")."""
        return names.settables(self)

    def readables(self) -> dict[str, Readable]:
        """Return the scalars that can be read, by full name ("drain.current", "meter.power")."""
        return names.readables(self)

    def wiring(self, kit: Kit | None = None) -> dict[str, Any]:
        """Return the plain SI document that a rehearsal is told (DEVELOPERS.md)."""
        return wiring.document(self, kit)

    def part_hash(self, plane: str) -> str:
        """Return a hash of everything between a plane and the receivers that a calibration there depends on."""
        return hashing.part_hash(self, plane)

    def part_summaries(self, plane: str) -> dict[str, str]:
        """Return the same things for a person: {"P3": "10 dB"}."""
        return hashing.part_summaries(self, plane)

    def canonical(self) -> str:
        """Return the bench as canonical JSON: sorted keys, SI values, free of comments and layout."""
        return json.dumps(self.model_dump(mode="json", by_alias=True), sort_keys=True, separators=(",", ":"))
