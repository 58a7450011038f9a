"""Which imperfections of the bench are switched on."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from typing import Any


@dataclass(frozen=True, slots=True)
class Imperfections:
    """All on in the reference world; a rehearsal switches them off one by one."""

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

    @classmethod
    def of(cls, rehearsal: Mapping[str, Any]) -> Imperfections:
        """Read the switches from the wiring's rehearsal part."""
        return cls(**{field.name: bool(rehearsal[field.name]) for field in fields(cls) if field.name in rehearsal})

    @classmethod
    def names(cls) -> frozenset[str]:
        """Names of all switches."""
        return frozenset(field.name for field in fields(cls))
