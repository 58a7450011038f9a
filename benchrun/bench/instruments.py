"""Instruments of a bench: how they are reached, what they may never be sent, and what their inputs bear."""

from __future__ import annotations

import math
from typing import Annotated, Literal

from pydantic import Field

from benchrun.bench.ranges import Fraction, FrequencyRange, LevelRange, PositiveRatio
from benchrun.fields import Angle, Count, FilePath, Form, Level, Name, Ratio, Text
from benchrun.quantities import show
from benchrun.yaml_source import Strict


class Limits(Strict):
    """What the instrument itself can do."""

    frequency: FrequencyRange | None = None
    level: LevelRange | None = None


class SourcePort(Strict):
    """The port of an analyser at which its own source leaves."""

    number: Annotated[Count, Field(ge=1)]
    damage: Level = Field(description="most that the port bears from outside")
    power_up: Level = Field(description="what comes out right after a power-up or a preset")


class Compression(Strict):
    """How much a receiver compresses, and by how much the phase turns, at a level."""

    loss: PositiveRatio
    phase: Angle = 0.0
    at: Level

    @property
    def summary(self) -> str:
        """Both figures and the level."""
        return f"{show(self.loss, 'ratio')} and {math.degrees(self.phase):.3g} deg at {show(self.at, 'level')}"


class ReceiverInput(Strict):
    """Every receiver input of one instrument."""

    linear: Level = Field(description="up to this level readings are linear")
    damage: Level
    compression: Compression | None = Field(None, description="corrected where it is given")
    floor: Level | None = Field(None, description="noise floor in 1 kHz")


class Sensor(Strict):
    """The power meter's sensor, with its own attenuator, calibration factor applied."""

    linear: Level
    damage: Level
    reflection: Fraction
    uncertainty: Annotated[Ratio, Field(ge=0.0)] = Field(description="standard uncertainty of a reading")


class ExpectedIdentity(Strict):
    """Who must answer at the address: fields of *IDN?; one that is left out is not looked at."""

    maker: Text | None = None
    model: Text | None = None
    serial: Text | None = None


class Instrument(Strict):
    """One instrument."""

    driver: Name
    address: Annotated[str, Form(r"[!-~]{3,200}", "a VISA resource string")] = Field(
        examples=["TCPIP0::192.0.2.21::hislip0::INSTR"]
    )
    dialect: FilePath | None = Field(
        None, description="dialect file, seen from this file's folder", examples=["my-receiver.dialect.yaml"]
    )
    identity: ExpectedIdentity | None = Field(None, description="the one instrument that this may be")
    ceiling: Level | None = Field(None, description="no higher level is ever sent")
    ramp: PositiveRatio | None = Field(None, description="a level never rises by more than this in one step")
    limits: Limits = Limits()
    source_port: SourcePort | None = None
    tones: Literal["coherent", "retuned"] | None = Field(
        None, description="coherent: all tones of a point at one instant; retuned: the receivers move between them"
    )
    receiver: ReceiverInput | None = None
    sensor: Sensor | None = None


#: Keys of an instrument that only one role has.
OF_ONE_ROLE = {
    "source-port": "wave-receiver",
    "tones": "wave-receiver",
    "receiver": "wave-receiver",
    "sensor": "power-meter",
}
