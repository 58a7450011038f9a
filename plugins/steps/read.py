"""`read`: one reading of raw waves and scalars, with exactly the signals on that its tones need."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np
from pydantic import Field, model_validator

from benchrun.contract.actions import Action, ReadAction
from benchrun.contract.capture import Capture
from benchrun.contract.hooks import StepScope, StepSpec
from benchrun.errors import InputError
from benchrun.yaml_source import Strict

from .quantity import Frequency, FullName, Name

PROBE, PUMP, IMAGE = "probe", "pump", "image"
#: Most points of a receiver's own sweep; beyond that, sweep in the recipe.
MOST_POINTS = 20001
#: Tones nearer than this many IF bandwidths stand in each other's filter.
LEAST_DISTANCE = 10
#: Offsets are rounded to 1 mHz, so that the same distance is the same number at every frequency.
OFFSET_DIGITS = 3


class GridModel(Strict):
    """The receiver's own sweep: evenly spaced, both ends included."""

    from_: Frequency = Field(alias="from")
    to: Frequency
    points: int = Field(ge=1, le=MOST_POINTS)


class OverModel(Strict):
    """What the receiver sweeps by itself."""

    frequency: GridModel


class ReadModel(Strict):
    """What is read."""

    name: Name = Field(description="The reading's name, for derive.")
    tones: tuple[Name, ...] = Field(
        (PROBE,), description="Signals to be on and read; image: the probe's mirror at the pump."
    )
    waves: tuple[Name, ...] | None = Field(
        None, description="Receivers to read; all of them where absent, [] for none."
    )
    also: tuple[FullName, ...] = Field((), description="Scalars read after the waves.")
    over: OverModel | None = Field(None, description="Frequencies that the receiver sweeps by itself.")
    follow: Name | None = Field(None, description="Signal whose source follows that sweep, at the offset in force.")

    @model_validator(mode="after")
    def _consistent(self) -> ReadModel:
        for key, names in (("tones", self.tones), ("waves", self.waves or ()), ("also", self.also)):
            twice = [name for name in names if names.count(name) > 1]
            if twice:
                raise ValueError(f"{key} names {twice[0]} twice; name it once.")
        if IMAGE in self.tones and not {PROBE, PUMP} <= set(self.tones):
            raise ValueError(
                "the image lies where probe and pump are both on: tones: [probe, pump, image]. "
                f"Here stands [{', '.join(self.tones)}]."
            )
        if self.follow and self.over is None:
            raise ValueError("`follow` needs a sweep of the receiver to follow: give `over` as well.")
        if self.follow and self.follow not in self.tones:
            raise ValueError(f"`follow: {self.follow}` needs {self.follow} among the tones.")
        return self


def expand(model: ReadModel, scope: StepScope) -> Iterator[Action]:
    """Yield one ReadAction. Raises InputError where a tone, a wave or a frequency is not known here."""
    _known("tones", model.tones, (*scope.signals, IMAGE))
    if IMAGE in model.tones:
        _require_distance(scope)
    waves = scope.receivers if model.waves is None else model.waves
    _known("waves", waves, scope.receivers)
    if model.follow is not None:
        _known("follow", (model.follow,), scope.signals)
    signals = tuple(name for name in scope.signals if name in model.tones)
    capture = _capture(model, waves, scope) if waves and model.tones else None
    yield ReadAction(model.name, capture, signals, model.also)


def _require_distance(scope: StepScope) -> None:
    """The image is a tone of its own only beside a probe and a pump that the IF filter tells apart."""
    distance_hz = abs(_frequency(PUMP, scope) - _frequency(PROBE, scope))
    if distance_hz < LEAST_DISTANCE * scope.if_bandwidth_hz:
        raise InputError(
            f"probe and pump are {distance_hz:g} Hz apart, and the IF bandwidth is {scope.if_bandwidth_hz:g} Hz: it "
            f"does not tell them apart. Put {LEAST_DISTANCE} IF bandwidths or more between them, best 5 to 10 MHz."
        )


def _known(key: str, names: tuple[str, ...], there: tuple[str, ...]) -> None:
    for name in names:
        if name not in there:
            raise InputError(f"{key}: there is no {name} on this bench; it has {', '.join(there)}.")


def _capture(model: ReadModel, waves: tuple[str, ...], scope: StepScope) -> Capture:
    grid_hz, offsets_hz = _grid(model, scope), tuple(_offset(tone, model, scope) for tone in model.tones)
    levels_dbm: tuple[float, ...] = ()
    if model.follow is not None:
        offset_hz = offsets_hz[model.tones.index(model.follow)]
        levels_dbm = scope.levels_dbm(model.follow, [hz + offset_hz for hz in grid_hz])
    return Capture(
        waves=waves,
        tones=model.tones,
        offsets_hz=offsets_hz,
        frequencies_hz=grid_hz,
        if_bandwidth_hz=scope.if_bandwidth_hz,
        averages=scope.averages,
        follow=model.follow is not None,
        levels_dbm=levels_dbm,
    )


def _reference(model: ReadModel) -> str:
    """Return the tone that the grid is: the probe, or the first tone where the probe is off."""
    return PROBE if PROBE in model.tones else model.tones[0]


def _grid(model: ReadModel, scope: StepScope) -> tuple[float, ...]:
    if model.over is None:
        return (_frequency(_reference(model), scope),)
    asked = model.over.frequency
    low, high = (scope.value(text, f"{PROBE}.frequency") for text in (asked.from_, asked.to))
    return tuple(np.linspace(low, high, asked.points).tolist())


def _offset(tone: str, model: ReadModel, scope: StepScope) -> float:
    """Return how far a tone lies from the grid, in Hz."""
    reference = _reference(model)
    if tone == reference:
        return 0.0
    if model.over is not None and tone not in (model.follow, IMAGE):
        raise InputError(
            f"the receiver sweeps and the {tone} would stand still. Write `follow: {tone}`, or sweep in the recipe."
        )
    source = PUMP if tone == IMAGE else tone
    distance_hz = round(_frequency(source, scope) - _frequency(reference, scope), OFFSET_DIGITS)
    return 2.0 * distance_hz if tone == IMAGE else distance_hz


def _frequency(signal: str, scope: StepScope) -> float:
    there: Mapping[str, float] = scope.conditions
    try:
        return there[f"{signal}.frequency"]
    except KeyError:
        raise InputError(f"{signal}.frequency has no value here. Set it before this reading.") from None


SPEC = StepSpec(
    key="read",
    model=ReadModel,
    help="Take a reading: {name: hot, tones: [probe, pump, image], also: [drain.current]}.",
    expand=expand,
)
