"""The recipe as the other rooms use it: what is asked for, validated, in SI, with the place of every step."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from pydantic import BaseModel, Field

from benchrun.errors import Problem
from benchrun.fields import Count, FilePath, Frequency, Name, Text
from benchrun.recipe.axis import Axis
from benchrun.yaml_source import Path_, Strict


class DeviceEntry(Strict):
    """The device under test."""

    part: Text
    serial: Text | None = None
    note: Text | None = None


class ReceiverSettings(Strict):
    """How the receiver stands for the whole recipe."""

    if_bandwidth: Frequency = Field(gt=0.0)
    averages: Count = Field(1, ge=1, le=65536)


class RecipeFile(Strict):
    """A *.recipe.yaml file. Acquire, derive and save are lists of one-key mappings, each with a model of its own."""

    benchrun: Literal[1]
    title: Text
    bench: FilePath
    device: DeviceEntry | None = None
    calibrations: Mapping[Name, FilePath] = Field(default_factory=dict)
    kit: FilePath | None = None
    receiver: ReceiverSettings
    acquire: list[Any] = Field(min_length=1, description="steps, in order; sweeps nest")
    derive: list[Any] = Field(default_factory=list)
    save: list[Any] = Field(default_factory=list)


@dataclass(frozen=True, slots=True)
class Place:
    """Where something stands in a file: line and column count from 1."""

    file: str
    line: int
    column: int

    def problem(self, message: str) -> Problem:
        """Return a Problem at this place."""
        return Problem(self.file, self.line, self.column, message)


@dataclass(frozen=True, slots=True)
class Step:
    """One step of an acquire part: the key it is written with, its checked model, and its place."""

    key: str
    model: BaseModel
    at: Place

    def document(self) -> dict[str, Any]:
        """Return plain data for hashing."""
        return {self.key: self.model.model_dump(mode="json", by_alias=True)}


@dataclass(frozen=True, slots=True)
class Sweep:
    """A sweep and what is done at each of its values."""

    axis: Axis
    do: tuple[Step | Sweep, ...]
    at: Place

    def document(self) -> dict[str, Any]:
        """Return plain data for hashing."""
        return {"sweep": self.axis.document(), "do": [item.document() for item in self.do]}


@dataclass(frozen=True, slots=True)
class Entry:
    """One entry of a derive or save part: its kind, its checked model, its place, and its way into the file's data."""

    kind: str
    model: BaseModel
    at: Place
    path: Path_ = ()


@dataclass(frozen=True, slots=True)
class Recipe:
    """A checked recipe; `file_name` and `text` are the file as read."""

    file: RecipeFile
    acquire: tuple[Step | Sweep, ...]
    derive: tuple[Entry, ...]
    save: tuple[Entry, ...]
    file_name: str = "recipe"
    text: str = ""
    source: str = field(default="recipe", compare=False)

    @property
    def title(self) -> str:
        """Title of the recipe."""
        return self.file.title

    @property
    def device(self) -> DeviceEntry | None:
        """The device under test, None where there is none."""
        return self.file.device

    @property
    def calibrations(self) -> Mapping[str, str]:
        """File of the recipe that makes each calibration, by the calibration's name."""
        return self.file.calibrations

    @property
    def receiver(self) -> ReceiverSettings:
        """How the receiver stands."""
        return self.file.receiver

    def document(self) -> dict[str, Any]:
        """Return what decides the readings as plain data, for hashing: not its title, derive or save part."""
        device = self.device.model_dump(mode="json") if self.device else None
        return {
            "device": device,
            "receiver": self.receiver.model_dump(mode="json"),
            "acquire": [item.document() for item in self.acquire],
        }
