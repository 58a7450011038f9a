"""Levels along the bench's parts against the parts' limits."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any, NamedTuple

import numpy as np

from .levels import FloatArray
from .parts import Part, nominal_loss_db
from .side import Side

# A wave that goes backwards through an amplifier comes out this much weaker.
_AMPLIFIER_ISOLATION_DB = 40.0


class Overload(NamedTuple):
    """A level above its limit."""

    item: str
    what: str
    value: float
    limit: float


def above(item: str, what: str, level_dbm: float, limit_dbm: float | None) -> Iterator[Overload]:
    """An overload if there is a limit and the level is above it."""
    if limit_dbm is not None and level_dbm > limit_dbm:
        yield Overload(item, what, level_dbm, limit_dbm)


def _forward_loss_db(part: Part, frequency_hz: FloatArray) -> float:
    return float(nominal_loss_db(part.spec.get("loss_db", 0.0), frequency_hz)[0])


def _backward_loss_db(part: Part, frequency_hz: FloatArray) -> float:
    if part.spec["kind"] == "amplifier":
        return _AMPLIFIER_ISOLATION_DB
    return float(part.spec.get("isolation_db", _forward_loss_db(part, frequency_hz)))


def along_feed(side: Side, frequency_hz: FloatArray, level_dbm: FloatArray) -> Iterator[Overload]:
    """Parts between a source and its plane, driven by the source."""
    waves = side.feed.waves(frequency_hz, level_dbm)
    for part, wave in zip(side.feed.parts, waves, strict=False):
        yield from above(part.name, "input level", _level_dbm(wave), part.spec.get("damage_dbm"))
    if side.coupler is not None:
        yield from above(side.coupler.name, "input level", _level_dbm(waves[-1]), side.coupler.spec.get("damage_dbm"))


def from_plane(
    side: Side,
    toward_dbm: float,
    away_dbm: float,
    frequency_hz: FloatArray,
    instruments: Mapping[str, Mapping[str, Any]],
) -> Iterator[Overload]:
    """Coupler, arms, receivers, and the feed backwards, for the powers of the waves at the plane."""
    level_dbm = away_dbm
    if side.coupler is not None:
        spec = side.coupler.spec
        yield from above(side.coupler.name, "level from the device", away_dbm, spec.get("damage_dbm"))
        for arm in side.arms.values():
            in_arm_dbm = (toward_dbm if arm.samples_incident else away_dbm) - spec.get("coupling_db", 20.0)
            yield from _down_an_arm(arm.parts, in_arm_dbm, frequency_hz, arm.instrument, arm.label, instruments)
        level_dbm -= float(nominal_loss_db(spec.get("loss_db", 0.0), frequency_hz)[0])
    for part in reversed(side.feed.parts):
        if part.spec["kind"] != "amplifier":  # its limit is for its input
            yield from above(part.name, "level from the device", level_dbm, part.spec.get("damage_dbm"))
        level_dbm -= _backward_loss_db(part, frequency_hz)
    source = instruments.get(side.feed.instrument, {})
    yield from above(side.feed.instrument, "level into the source port", level_dbm, source.get("port_damage_dbm"))


def _down_an_arm(
    parts: Sequence[Part],
    level_dbm: float,
    frequency_hz: FloatArray,
    instrument: str,
    label: str,
    instruments: Mapping[str, Mapping[str, Any]],
) -> Iterator[Overload]:
    for part in parts:
        yield from above(part.name, "input level", level_dbm, part.spec.get("damage_dbm"))
        level_dbm -= _forward_loss_db(part, frequency_hz)
    limit_dbm = instruments[instrument].get("receiver", {}).get("damage_dbm")
    yield from above(f"{instrument} receiver {label}", "input level", level_dbm, limit_dbm)


def _level_dbm(wave: np.ndarray[Any, np.dtype[np.complex128]]) -> float:
    return float(20.0 * np.log10(np.abs(wave).max(initial=1e-20)) + 30.0)
