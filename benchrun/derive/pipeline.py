"""The derive part of a recipe, step by step: readings in, results out. Pure: no file, no clock, no instrument."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from benchrun.contract.reading import Reading
from benchrun.derive.facts import BenchFacts
from benchrun.derive.plane_steps import calibrate_step, level_step
from benchrun.derive.reflection_steps import correct_step, hot_match_step, one_port_step
from benchrun.derive.results import Provenance, Results
from benchrun.derive.standards import Definition
from benchrun.derive.work import Known, Work
from benchrun.errors import DataSetError


@dataclass(frozen=True, slots=True)
class Step:
    """One entry of a recipe's derive part: its kind ("correct", "hot-match", ...) and its values by field name."""

    kind: str
    values: Mapping[str, Any]


_STEPS: Mapping[str, Callable[[Work, Mapping[str, Any]], Results]] = {
    "correct": correct_step,
    "hot-match": hot_match_step,
    "one-port": one_port_step,
    "calibrate": calibrate_step,
    "level": level_step,
}


def derive(
    steps: Sequence[Step],
    readings: Mapping[str, Sequence[Reading]],
    facts: Callable[[str], BenchFacts],
    calibrations: Mapping[str, Known],
    definitions: Mapping[str, Definition],
    provenance: Provenance,
    kit_name: str = "",
) -> Results:
    """Return the results of the derive `steps`, in order.

    `readings` are by name, as committed; `facts` gives a plane's BenchFacts; `calibrations` are what the recipe's
    names for calibrations stand for; `definitions` are the kit's standards. Raises CalibrationError where a
    calibration is missing or does not fit, DataSetError where readings do not allow what was asked.
    """
    work = Work(readings, facts, calibrations, definitions, kit_name, provenance)
    results = Results()
    for step in steps:
        if step.kind not in _STEPS:
            raise DataSetError(f"derive knows no step '{step.kind}': it has {', '.join(_STEPS)}.")
        results = results + _STEPS[step.kind](work, step.values)
    return results
