"""What a calibration of a plane depends on: the parts and receivers between that plane and the receivers.

At a plane with receivers these are the coupler, the parts behind its arms, and what the bench says of the receivers.
What lies between a source and the coupler is not among them: the incident receiver sees what it does. At a plane
without receivers a calibration levels the signal that arrives there, so that signal's instrument and path count.
"""

from __future__ import annotations

import hashlib
import json
from typing import TYPE_CHECKING, Any

from pydantic import BaseModel

if TYPE_CHECKING:
    from benchrun.bench.model import Bench, Receiver


def receivers_at(bench: Bench, plane: str) -> dict[str, Receiver]:
    """Return the receivers whose coupler stands on the way of the signal to `plane`, by name."""
    passed = {part for signal in bench.signals.values() if signal.plane == plane for part in signal.path}
    return {name: receiver for name, receiver in bench.receivers.items() if receiver.coupler in passed}


def _parts_between(bench: Bench, plane: str) -> list[str]:
    receivers = receivers_at(bench, plane).values()
    if receivers:
        return list(dict.fromkeys(part for r in receivers for part in (r.coupler, *r.path)))
    return [part for signal in bench.signals.values() if signal.plane == plane for part in signal.path]


def part_hash(bench: Bench, plane: str) -> str:
    """Return the SHA-256 (hexadecimal) of the canonical JSON of what lies between `plane` and the receivers."""
    receivers = receivers_at(bench, plane)
    described: dict[str, Any] = {
        "plane": plane,
        "parts": {name: _plain(bench.parts[name]) for name in _parts_between(bench, plane)},
        "receivers": {name: _plain(receiver) for name, receiver in receivers.items()},
        "instruments": {
            receiver.instrument: _plain(bench.instruments[receiver.instrument].receiver)
            for receiver in receivers.values()
        },
    }
    if not receivers:
        described["signals"] = {name: _plain(s) for name, s in bench.signals.items() if s.plane == plane}
    text = json.dumps(described, sort_keys=True, separators=(",", ":"))
    return hashlib.sha256(text.encode()).hexdigest()


def part_summaries(bench: Bench, plane: str) -> dict[str, str]:
    """Return the parts and receivers behind part_hash(), by name, each in a word or two."""
    found = {name: bench.parts[name].summary for name in _parts_between(bench, plane)}
    for name, receiver in receivers_at(bench, plane).items():
        own = bench.instruments[receiver.instrument].receiver
        compression = f", compression {own.compression.summary}" if own and own.compression else ""
        way = " ".join((receiver.coupler, receiver.arm, *receiver.path))
        found[f"receiver {name}"] = f"{receiver.instrument} {receiver.receiver} ({way}){compression}"
    return found


#: What does not change what a part does to a wave; a Touchstone file counts by what it says, not by its name.
_BESIDE: dict[str, Any] = {"linear": True, "damage": True, "floor": True, "loss": {"file"}, "gain": {"file"}}


def _plain(model: BaseModel | None) -> Any:
    return model.model_dump(mode="json", by_alias=True, exclude=_BESIDE) if model else None
