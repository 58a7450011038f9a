"""Check files of every kind without touching an instrument."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from benchrun.bench import load_bench, load_kit
from benchrun.drivers.dialects import load_dialect
from benchrun.drivers.registry import load_registry
from benchrun.errors import FileProblemsError, Problem
from benchrun.flow.inputs import absent_recipes, load_inputs, roles
from benchrun.flow.planning import plan

KINDS = (".recipe.yaml", ".bench.yaml", ".kit.yaml", ".dialect.yaml")


def check_files(paths: Sequence[Path]) -> list[Problem]:
    """Return the mistakes of all files, each once, in order; [] where there are none."""
    problems: set[Problem] = set()
    for path in paths:
        problems.update(_check(path))
    return sorted(problems)


def _check(path: Path) -> Sequence[Problem]:
    name = path.name
    if name.endswith(".recipe.yaml"):
        return _check_recipe(path)
    if name.endswith(".bench.yaml"):
        return load_bench(path, roles(load_registry()))[1]
    if name.endswith(".kit.yaml"):
        return load_kit(path)[1]
    if name.endswith(".dialect.yaml"):
        return load_dialect(path)[1]
    return [
        Problem(str(path), 0, 0, f"what kind of file this is, its name does not say: it ends in {', '.join(KINDS)}.")
    ]


def _check_recipe(path: Path) -> Sequence[Problem]:
    try:
        inputs = load_inputs(path)
    except FileProblemsError as error:
        return error.problems
    problems = absent_recipes(inputs)
    try:
        plan(inputs, {})
    except FileProblemsError as error:
        problems += error.problems
    return problems
