"""What derive must know of a bench, taken from its file."""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np

from benchrun.bench import Bench, Kit
from benchrun.bench.hashing import receivers_at
from benchrun.derive.facts import BenchFacts
from benchrun.derive.linearity import Linearity, linearity_from
from benchrun.derive.standards import Definition, define


def facts_of(bench: Bench, kit: Kit | None) -> Callable[[str], BenchFacts]:
    """Return a function that gives a plane's facts."""

    def facts(plane: str) -> BenchFacts:
        receivers = receivers_at(bench, plane)
        arms = {receiver.arm: name for name, receiver in receivers.items()}
        device = bench.device
        return BenchFacts(
            plane=plane,
            reflected=arms.get("reflected", ""),
            incident=arms.get("incident", ""),
            linearity={name: linearity(bench, receiver.instrument) for name, receiver in receivers.items()},
            return_gain_db=device.return_gain,
            input_match_db=device.input_match,
            output_match=float(10.0 ** (device.output_match / 20.0)),
            conversion=device.conversion,
            part_hash=bench.part_hash(plane),
            parts=bench.part_summaries(plane),
            reference_ohm=kit.impedance_ohm if kit is not None else 50.0,
        )

    return facts


def linearity(bench: Bench, instrument: str) -> Linearity:
    """Return the linearity of an instrument's receivers; ideal where the bench file does not say."""
    own = bench.instruments[instrument].receiver
    if own is None:
        return Linearity(0j, np.inf)
    if own.compression is None:
        return Linearity(0j, own.linear)
    return linearity_from(own.compression.loss, own.compression.phase, own.compression.at, own.linear)


def definitions_of(kit: Kit | None) -> Mapping[str, Definition]:
    """Return the kit's standards as derive takes them."""
    if kit is None:
        return {}
    return {name: define(description, kit.files) for name, description in kit.plain().items()}
