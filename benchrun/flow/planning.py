"""From inputs to a schedule that has passed the level check. No instrument is touched."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

from benchrun.derive.calibration import Calibration
from benchrun.derive.levelling import Levelling
from benchrun.drivers.dialects import dialect_for
from benchrun.errors import FileProblemsError
from benchrun.flow.inputs import Inputs, load_inputs
from benchrun.flow.result import LevelReport
from benchrun.flow.subject import require_report
from benchrun.recipe.entries import HotMatch
from benchrun.schedule import Schedule, build_schedule

Known = Mapping[str, Calibration | Levelling]


def plan(inputs: Inputs, known: Known) -> Schedule:
    """Return the schedule; the drive is levelled where `known` holds the levelling that the recipe names.

    Raises FileProblemsError for what only shows itself when values meet the bench.
    """
    require_report(inputs)
    schedule = build_schedule(
        inputs.recipe, inputs.bench, inputs.registry.steps, drive_gain=_levelling(inputs, known), kit=inputs.kit
    )
    require_followers(inputs, schedule)
    return schedule


def require_followers(inputs: Inputs, schedule: Schedule) -> None:
    """Raise FileProblemsError where a source is to follow the receiver's sweep, and the dialect of either cannot."""
    problems = []
    for place, index in schedule.places:
        for name in place.signals if place.follow else ():
            instrument = inputs.bench.signals[name].instrument
            absent = _absent(inputs, instrument)
            if absent:
                problems.append(schedule.reading(index).position.problem(
                    f"`follow` needs lists and trigger lines: {instrument} has no {', '.join(absent)} in its dialect. "
                    "Sweep in the recipe, so that it is stepped, or give the headers in its dialect file."
                ))  # fmt: skip
    if problems:
        raise FileProblemsError(problems)


def _absent(inputs: Inputs, instrument: str) -> tuple[str, ...]:
    """Return the dialect's entries that an instrument lacks for following or leading a sweep."""
    spec = inputs.registry.drivers[inputs.bench.instruments[instrument].driver]
    dialect = dialect_for(spec, inputs.bench.dialect_path(instrument))
    return tuple(entry for entry in spec.following if not dialect.has(entry)) if spec.following else ("list",)


def _levelling(inputs: Inputs, known: Known) -> Levelling | None:
    for entry in inputs.recipe.derive:
        if isinstance(entry.model, HotMatch) and entry.model.drive is not None:
            found = known.get(entry.model.drive)
            if isinstance(found, Levelling):
                return found
    return None


def plan_levels(recipe_path: Path, bench: Path | None = None) -> LevelReport:
    """Return the level check of a recipe, with what else the schedule says beforehand. Raises FileProblemsError."""
    from benchrun.plan.levels import check_levels

    inputs = load_inputs(recipe_path, bench)
    schedule = plan(inputs, {})
    table = check_levels(schedule, inputs.bench)
    return LevelReport(table, len(schedule), schedule.axes_text, schedule.duration_s, schedule.prompts, table.notes)
