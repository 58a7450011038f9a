"""From inputs to a schedule that has passed the level check. No instrument is touched."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

from benchrun.derive.calibration import Calibration
from benchrun.derive.levelling import Levelling
from benchrun.flow.inputs import Inputs, load_inputs
from benchrun.flow.result import LevelReport
from benchrun.recipe.entries import HotMatch
from benchrun.schedule import Schedule, build_schedule

Known = Mapping[str, Calibration | Levelling]


def plan(inputs: Inputs, known: Known) -> Schedule:
    """Return the schedule; the drive is levelled where `known` holds the levelling that the recipe names.

    Raises FileProblemsError for what only shows itself when values meet the bench.
    """
    return build_schedule(
        inputs.recipe, inputs.bench, inputs.registry.steps, drive_gain=_levelling(inputs, known), kit=inputs.kit
    )


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
    return LevelReport(table, len(schedule), schedule.axes_text, schedule.duration_s, schedule.prompts)
