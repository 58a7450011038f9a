"""What the steps of a derive part share: the inputs, and what earlier steps have made."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray
from benchrun.contract.reading import Reading
from benchrun.derive.calibration import Calibration, Circumstances, valid_until
from benchrun.derive.corrected import Corrected
from benchrun.derive.facts import BenchFacts
from benchrun.derive.levelling import Levelling
from benchrun.derive.points import Points, condition_keys, stack
from benchrun.derive.results import OnePortData, Provenance
from benchrun.derive.standards import Definition
from benchrun.errors import DataSetError

Known = Calibration | Levelling
Chosen = npt.NDArray[np.bool_]
AMBIENT = "ambient.temperature_degc"


@dataclass(slots=True)
class Work:
    """Inputs of a derivation, and the corrected readings so far, by name.

    `readings` are as committed, by name; `facts` gives a plane's BenchFacts; `known` holds calibrations and
    levellings by the recipe's names for them; `definitions` are the kit's standards.
    """

    readings: Mapping[str, Sequence[Reading]]
    facts: Callable[[str], BenchFacts]
    known: Mapping[str, Known]
    definitions: Mapping[str, Definition]
    kit_name: str
    provenance: Provenance
    corrected: dict[str, Corrected] = field(default_factory=dict)

    def points(self, name: str) -> Points:
        """Return the readings called `name` as points. Raises DataSetError where there are none."""
        return stack(self.readings.get(name, ()), name)

    def of(self, name: str) -> Corrected:
        """Return the corrected readings called `name`. Raises DataSetError where no step has corrected them."""
        if name not in self.corrected:
            raise DataSetError(
                f"readings '{name}' are not corrected yet: put correct: {{readings: {name}, calibration: ...}} "
                "before this step."
            )
        return self.corrected[name]

    def circumstances(self, points: Points, plane: str, valid_for_s: float) -> Circumstances:
        """Return what a calibration of `plane` from `points` is to remember, valid from the last reading on."""
        facts, temperature = self.facts(plane), points.scalars.get(AMBIENT)
        return Circumstances(
            made_utc=points.ended_utc,
            valid_until_utc=valid_until(points.ended_utc, valid_for_s),
            origin=self.provenance.origin,
            part_hash=facts.part_hash,
            parts=dict(facts.parts),
            temperature_degc=None if temperature is None else float(np.nanmean(temperature)),
            kit=self.kit_name,
            power_meter=", ".join(self.provenance.identities.get(meter, meter) for meter in points.meters()),
            reference_ohm=facts.reference_ohm,
            readings_hash=self.provenance.readings_hash,
            version=self.provenance.version,
        )

    def network(
        self,
        quantity: str,
        corrected: Corrected,
        chosen: Chosen,
        conditions: Mapping[str, float | str],
        values: ComplexArray,
        lines: tuple[str, ...],
    ) -> OnePortData:
        """Return the `chosen` (N,) of `values` (N,) as one-port data by rising frequency, with `lines` as comments."""
        frequency_hz = corrected.points.frequency_hz[chosen]
        order = np.argsort(frequency_hz, kind="stable")
        ohm = corrected.calibration.circumstances.reference_ohm
        serial = self.provenance.serial
        return OnePortData(quantity, serial, conditions, frequency_hz[order], values[chosen][order], lines, ohm)


def groups(points: Points) -> list[tuple[Chosen, dict[str, float | str]]]:
    """Return, for each combination of swept conditions (frequency aside), which points (N,) have it."""
    keys = condition_keys(points)
    rows = list(zip(*(points.conditions[k].tolist() for k in keys), strict=True)) if keys else [()] * len(points)
    return [(np.array([r == row for r in rows]), dict(zip(keys, row, strict=True))) for row in dict.fromkeys(rows)]


def counted(flags: tuple[tuple[str, ...], ...]) -> dict[str, int]:
    """Return how many points carry each word."""
    counts: dict[str, int] = {}
    for words in flags:
        for word in words:
            counts[word] = counts.get(word, 0) + 1
    return counts


def flag_notes(flags: tuple[tuple[str, ...], ...]) -> tuple[str, ...]:
    """Return a sentence for each word that a point carries."""
    return tuple(f"{count} of {len(flags)} points are flagged {word}" for word, count in sorted(counted(flags).items()))
