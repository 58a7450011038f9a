"""Read recipe files: the recipe, or all of its problems with their places."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from pydantic import BaseModel

from benchrun.bench import Bench
from benchrun.contract.hooks import StepSpec
from benchrun.errors import Problem
from benchrun.recipe.acquire import AcquireReader
from benchrun.recipe.between import problems_between
from benchrun.recipe.entries import DERIVE, SAVE
from benchrun.recipe.messages import no_such
from benchrun.recipe.model import Entry, Place, Recipe, RecipeFile
from benchrun.yaml_source import Path_, Placed, Source, apart_from, check, read_source, salvage


def recipe_source(path: Path) -> tuple[RecipeFile | None, Source, list[Problem]]:
    """Read a recipe's outer form: enough to know its bench, kit and calibrations."""
    source = read_source(path)
    if source.data is None:
        return None, source, source.problems
    file, problems = check(source, RecipeFile)
    return file, source, [*source.problems, *problems]


def files_named(source: Source) -> tuple[str | None, str | None]:
    """Return the bench file and the kit file that a recipe names, also where the rest of it has mistakes."""
    data = source.data if isinstance(source.data, Placed) else {}
    bench, kit = (name if isinstance(name := data.get(key), str) and name else None for key in ("bench", "kit"))
    return bench, kit


def load_recipe(path: Path, bench: Bench | None, steps: Mapping[str, StepSpec]) -> tuple[Recipe | None, list[Problem]]:
    """Read a *.recipe.yaml file against a bench: (recipe, []) or (None, all problems).

    `steps` are the installed step kinds by key. With `bench` None (the bench file itself has problems) names of the
    bench are not checked.
    """
    file, source, problems = recipe_source(path)
    data = source.data if isinstance(source.data, Placed) else Placed()
    reader = AcquireReader(source, bench, steps)
    acquire = reader.items(data.get("acquire"), ("acquire",))
    derive, derive_problems = _entries(source, data.get("derive"), "derive", DERIVE)
    save, save_problems = _entries(source, data.get("save"), "save", SAVE)
    problems += [*reader.problems, *derive_problems, *save_problems]
    sound, left_out = (file, frozenset[str]()) if file is not None else salvage(source, RecipeFile)
    if sound is not None:
        readings = None if reader.incomplete else reader.readings
        problems += apart_from(problems_between(source, sound, derive, readings, bench), left_out)
    if file is None or problems:
        return None, sorted(set(problems))
    return Recipe(file, acquire, derive, save, path.name, source.text, str(path)), []


def _entries(
    source: Source, given: Any, part: str, models: Mapping[str, type[BaseModel]]
) -> tuple[tuple[Entry, ...], list[Problem]]:
    """Read a derive or save part."""
    entries: list[Entry] = []
    problems: list[Problem] = []
    for position, item in enumerate(given if isinstance(given, list) else ()):
        path: Path_ = (part, position)
        if not isinstance(item, Placed) or len(item) != 1:
            message = f"an entry of {part} is one key with its values; known: {', '.join(models)}."
            problems.append(source.problem(path, message))
            continue
        kind = next(iter(item))
        here = (*path, kind)
        if kind not in models:
            problems.append(source.problem(here, no_such(f"entry of {part}", kind, models), at_key=True))
            continue
        model, more = check(source, models[kind], here, {} if item[kind] is None else item[kind])
        problems += more
        if model is not None:
            entries.append(Entry(kind, model, Place(source.file, *source.mark(here, at_key=True)), here))
    return tuple(entries), problems
