"""A reading: raw waves and scalars at one settled condition, as committed to the archive."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from benchrun.contract.capture import ComplexArray


@dataclass(frozen=True, slots=True)
class Reading:
    """One committed reading, keyed by (index, name, attempt).

    `conditions` are what was asked for: keys are "<settable>_<unit suffix>" or a sweep variable's name with its unit
    suffix ("drive_dbm", "frequency_hz", "pump.level_dbm"), values SI floats, or text ("connected.output": "open").
    `frequencies_hz` is the probe's grid (P points), `tones` (T) and `waves` (W) name the axes of `data`, complex128
    of shape (T, W, P), rms root-watt, or T = W = 0 where only scalars were read. `scalars` are what was read beside
    the waves ("drain.current_a", "meter.power_dbm"). `flags` are words such as "over-limit:reflected",
    "reference-unlocked:pump"; an empty tuple means nothing to remark. Times: bench clock in ns (virtual in a
    rehearsal), and UTC as ISO 8601 text.
    """

    index: int
    name: str
    attempt: int
    conditions: Mapping[str, float | str]
    frequencies_hz: tuple[float, ...]
    tones: tuple[str, ...]
    offsets_hz: tuple[float, ...]
    waves: tuple[str, ...]
    data: ComplexArray
    coherent: bool = False
    scalars: Mapping[str, float] = field(default_factory=dict)
    flags: tuple[str, ...] = ()
    started_ns: int = 0
    ended_ns: int = 0
    started_utc: str = ""
