"""Schedules from a few lines of recipe, on the example bench or a changed copy of it."""

from __future__ import annotations

import tempfile
from functools import cache
from pathlib import Path
from typing import Any

from benchrun_plugins.steps import STEPS

from benchrun.bench import Bench, Kit, load_bench, load_kit
from benchrun.contract.hooks import StepSpec
from benchrun.recipe import Recipe, load_recipe
from benchrun.schedule import Schedule, build_schedule

RECIPES = Path(__file__).parents[2] / "recipes"
KNOWN = {step.key: step for step in STEPS}
HEAD = "benchrun: 1\ntitle: A test\nbench: balloon-driver.bench.yaml\nreceiver: {if-bandwidth: 300 Hz}\nacquire:\n"


@cache
def example_bench() -> Bench:
    """Return the bench of the examples."""
    return bench_from((RECIPES / "balloon-driver.bench.yaml").read_text(encoding="utf-8"))


def changed_bench(*changes: tuple[str, str]) -> Bench:
    """Return the example's bench with texts replaced."""
    text = (RECIPES / "balloon-driver.bench.yaml").read_text(encoding="utf-8")
    for before, after in changes:
        assert text.count(before) == 1, before
        text = text.replace(before, after)
    return bench_from(text)


def bench_from(text: str) -> Bench:
    """Return the bench that a text describes."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "test.bench.yaml"
        path.write_text(text, encoding="utf-8")
        dialect = "simulated-wave-receiver.dialect.yaml"
        (Path(folder) / dialect).write_bytes((RECIPES / dialect).read_bytes())
        bench, problems = load_bench(path)
    assert bench is not None, problems
    return bench


def example_kit() -> Kit:
    """Return the kit of the examples."""
    kit, problems = load_kit(RECIPES / "field-kit.kit.yaml")
    assert kit is not None, problems
    return kit


def example_recipe(name: str) -> Recipe:
    """Return one of the example recipes."""
    recipe, problems = load_recipe(RECIPES / f"{name}.recipe.yaml", example_bench(), KNOWN)
    assert recipe is not None, problems
    return recipe


def recipe_from(acquire: str, bench: Bench | None = None, steps: dict[str, StepSpec] | None = None) -> Recipe:
    """Return the recipe with this acquire part, whose first line is line 6 of the file."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "test.recipe.yaml"
        path.write_text(HEAD + acquire, encoding="utf-8")
        recipe, problems = load_recipe(path, bench or example_bench(), steps or KNOWN)
    assert recipe is not None, problems
    return recipe


def schedule_from(
    acquire: str, bench: Bench | None = None, steps: dict[str, StepSpec] | None = None, **more: Any
) -> Schedule:
    """Return the schedule of an acquire part."""
    used = bench or example_bench()
    return build_schedule(recipe_from(acquire, used, steps), used, steps or KNOWN, **more)
