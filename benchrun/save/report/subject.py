"""What a report is made of: everything that one archive tells, and what was derived from it again."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from benchrun.archive import Event, Meta
from benchrun.bench import Bench
from benchrun.contract.reading import Reading
from benchrun.derive.calibration import Calibration
from benchrun.derive.levelling import Levelling
from benchrun.derive.results import Results


@dataclass(frozen=True, slots=True)
class Subject:
    """One run. `readings` are the final attempts by name, `repeated` how many attempts others replaced.

    `bench` is None where its file can no longer be read. `known` holds calibrations and levellings that the run used,
    `made` those that it made. `results` is empty where nothing could be derived, and `refusal` then says why.
    `problems` is what is wrong with the archive itself.
    """

    meta: Meta
    readings: Mapping[str, Sequence[Reading]]
    digest: str
    events: Sequence[Event] = ()
    repeated: int = 0
    bench: Bench | None = None
    known: Mapping[str, Calibration | Levelling] = field(default_factory=dict)
    made: Mapping[str, Calibration | Levelling] = field(default_factory=dict)
    results: Results = field(default_factory=Results)
    refusal: str = ""
    problems: Sequence[str] = ()

    @property
    def count(self) -> int:
        """How many readings are final."""
        return sum(len(readings) for readings in self.readings.values())

    @property
    def simulated(self) -> bool:
        """Whether nothing real was measured."""
        return self.meta.origin != "real"
