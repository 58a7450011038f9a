"""Building a schedule from a recipe and a bench: every mistake at once, with its place, or the schedule."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping, Sequence
from typing import Any

from benchrun.bench import Bench, Kit
from benchrun.contract.hooks import StepSpec
from benchrun.errors import FileProblemsError
from benchrun.recipe import Recipe
from benchrun.schedule.drive import DriveGain, Driver, PartsGain
from benchrun.schedule.program import Node, StepNode, SweepNode, compiled
from benchrun.schedule.schedule import Schedule, Surroundings
from benchrun.schedule.survey import Survey, kinds_of
from benchrun.schedule.timing import ActionTimes, Timetable, Timing

#: Changes when the same recipe and bench would give another schedule than before.
VERSION = 1
_WAYS = ("visa", "simulated", "rehearsal-channel")


def build_schedule(
    recipe: Recipe,
    bench: Bench,
    steps: Mapping[str, StepSpec],
    drive_gain: DriveGain | None = None,
    timing: Timing | None = None,
    kit: Kit | None = None,
) -> Schedule:
    """Return the schedule of a recipe on a bench. Nothing is touched, and nothing is unrolled.

    `drive_gain` is the levelled drive; without it a drive is worked out from the bench's parts. With `kit`, what is to
    be connected is checked against its standards. Raises FileProblemsError with every mistake found.
    """
    body = compiled(recipe.acquire, steps)
    signal = bench.drive_signal
    settables = bench.settables()
    driver = None
    if signal is not None:
        driver = Driver(signal, drive_gain or PartsGain(bench, signal), settables[f"{signal}.level"].low)
    known = {name: settable.kind for name, settable in settables.items()}
    clashes, kinds = kinds_of(body, known)
    bias = frozenset(f"{name}.{quantity}" for name in bench.bias for quantity in ("voltage", "current-limit"))
    around = Surroundings(recipe, bench, kinds, driver, bias)
    survey = Survey(bench, kit, driver, around.scope(), around.state)
    survey.run(body)
    problems = [*clashes, *survey.problems]
    if problems:
        raise FileProblemsError(problems)
    timetable = Timetable(body, around.state, around.scope(), ActionTimes(bench, timing or Timing(), steps))
    return Schedule(body, around, timetable, _prompts(body), _hash(recipe, bench, steps, drive_gain))


def _prompts(body: Sequence[Node]) -> int:
    return sum(node.prompts if isinstance(node, StepNode) else len(node.axis) * _prompts(node.body) for node in body)


def _hash(recipe: Recipe, bench: Bench, steps: Mapping[str, StepSpec], drive_gain: DriveGain | None) -> str:
    used = sorted({node.spec.key for node in _steps(compiled(recipe.acquire, steps))})
    content = {
        "schedule": VERSION,
        "recipe": recipe.document(),
        "bench": without_ways(json.loads(bench.canonical())),
        "drive": _without_dates(drive_gain.to_document()) if drive_gain is not None else None,
        "steps": {key: [steps[key].expand.__module__, steps[key].model.model_json_schema()] for key in used},
    }
    text = json.dumps(content, sort_keys=True, separators=(",", ":"), allow_nan=False)
    return hashlib.sha256(text.encode()).hexdigest()


def without_ways(bench: dict[str, Any]) -> dict[str, Any]:
    """Leave out how the instruments are reached: the same happens in-process, over HiSLIP and over raw sockets."""
    instruments = {name: {**one, "address": ""} for name, one in bench["instruments"].items()}
    return {key: value for key, value in bench.items() if key not in _WAYS} | {"instruments": instruments}


def _without_dates(drive: Mapping[str, Any]) -> dict[str, Any]:
    """Leave out when and from what the drive was levelled: the same table gives the same levels."""
    return {key: value for key, value in drive.items() if key != "circumstances"}


def _steps(body: Sequence[Node]) -> list[StepNode]:
    return [step for node in body for step in (_steps(node.body) if isinstance(node, SweepNode) else [node])]
