"""What derive must know of a bench: who reads which wave, how linearly, through what, and what the bench reflects."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from benchrun.derive.linearity import Linearity


@dataclass(frozen=True, slots=True)
class BenchFacts:
    """A bench's plain facts for one calibrated plane.

    `reflected` and `incident` name the waves of the coupler's two arms: measurement and reference receiver.
    `linearity` is of each wave's receiver. The declared worst cases of the bench file: `return_gain_db` and
    `input_match_db` as in hot.distance_bound, `output_match` the largest |Gs| seen from the device's output,
    `conversion` the largest |T22|. `part_hash` and `parts` are those of the parts between plane and receivers;
    `reference_ohm` is the kit's impedance.
    """

    plane: str
    reflected: str
    incident: str
    linearity: Mapping[str, Linearity]
    return_gain_db: float
    input_match_db: float
    output_match: float
    conversion: float
    part_hash: str
    parts: Mapping[str, str] = field(default_factory=dict)
    reference_ohm: float = 50.0
