"""What a run starts from: recipe, bench and kit, read together so that all of their mistakes come at once."""

from __future__ import annotations

import difflib
from collections.abc import Collection, Mapping
from dataclasses import dataclass
from pathlib import Path

from benchrun.bench import Bench, Kit, load_bench, load_kit
from benchrun.drivers.dialects import dialect_for
from benchrun.drivers.registry import Registry, load_registry
from benchrun.errors import FileProblemsError, Problem
from benchrun.recipe import Recipe, files_named, load_recipe, recipe_source
from benchrun.visa.address import address_fault
from benchrun.yaml_source import Path_, Source, read_source

#: How the names of files end that are no recipes.
OTHERS = (".bench.yaml", ".kit.yaml", ".dialect.yaml")


@dataclass(frozen=True, slots=True)
class Inputs:
    """A checked recipe with its bench, its kit where it names one, and the installed drivers and steps."""

    recipe: Recipe
    bench: Bench
    kit: Kit | None
    registry: Registry
    path: Path

    @property
    def folder(self) -> Path:
        """Folder of the recipe file: other files that it names stand there."""
        return self.path.parent

    def bench_problem(self, message: str) -> Problem:
        """Return a problem of the bench file as a whole."""
        return Problem(str(self.bench.path), 0, 0, message)

    def files(self) -> dict[str, str]:
        """Return the text of every file that readings and derivation depend on, by the name it is restored under."""
        found = {self.path.name: self.recipe.text, self.bench.path.name: self.bench.text, **self.bench.files}
        for name, instrument in self.bench.instruments.items():
            path = self.bench.dialect_path(name)
            if path is not None and instrument.dialect is not None:
                found[instrument.dialect] = path.read_text("utf-8")
        if self.kit is not None:
            found |= {self.kit.path.name: self.kit.text, **self.kit.files}
        return found


def load_inputs(recipe_path: Path, bench_path: Path | None = None, kit_path: Path | None = None) -> Inputs:
    """Read a recipe and everything it names; `bench_path` and `kit_path` stand in for the files that it names.

    Raises FileProblemsError with the mistakes of all files.
    """
    if other := next((kind for kind in OTHERS if recipe_path.name.endswith(kind)), None):
        message = f"this is a {other[1:-5]} file by its name; a recipe is expected here: *.recipe.yaml."
        raise FileProblemsError([Problem(str(recipe_path), 0, 0, message)])
    registry, folder = load_registry(), recipe_path.parent
    _, source, problems = recipe_source(recipe_path)
    bench_name, kit_name = files_named(source)
    bench: Bench | None = None
    kit: Kit | None = None
    if bench_name is not None:
        absent = [] if bench_path else absent_file(source, ("bench",), folder / bench_name)
        if not absent:
            bench, absent = load_bench(bench_path or folder / bench_name, roles(registry))
        problems += absent + _dialect_problems(bench, registry) + _address_problems(bench)
    if kit_name is not None:
        absent = [] if kit_path else absent_file(source, ("kit",), folder / kit_name)
        if not absent:
            kit, absent = load_kit(kit_path or folder / kit_name)
        problems += absent
    recipe, recipe_problems = load_recipe(recipe_path, bench, registry.steps)
    problems += recipe_problems
    if problems or recipe is None or bench is None:
        raise FileProblemsError(problems)
    return Inputs(recipe, bench, kit, registry, recipe_path)


def absent_file(source: Source, where: Path_, path: Path) -> list[Problem]:
    """Return a problem at the place in a file that names another one, where that is not there; [] where it is."""
    if path.exists():
        return []
    kind = "".join(path.suffixes[-2:])
    near = difflib.get_close_matches(path.name, [other.name for other in path.parent.glob(f"*{kind}")], n=1)
    meant = f"Did you mean '{near[0]}'?" if near else "Names are taken from the folder of this file."
    return [source.problem(where, f"there is no file '{path.name}'. {meant}")]


def absent_recipes(inputs: Inputs, chosen: Collection[str] = ()) -> list[Problem]:
    """Return a problem for each calibration whose recipe is not there, but the `chosen` ones."""
    _, source, _ = recipe_source(inputs.path)
    return [
        problem
        for name, file in inputs.recipe.calibrations.items()
        if name not in chosen
        for problem in absent_file(source, ("calibrations", name), inputs.folder / file)
    ]


def roles(registry: Registry) -> Mapping[str, str]:
    """Return the role of each installed driver."""
    return {name: spec.role for name, spec in registry.drivers.items()}


def _dialect_problems(bench: Bench | None, registry: Registry) -> list[Problem]:
    """Compile every instrument's dialect, so that what a driver lacks is known before anything is opened."""
    problems: list[Problem] = []
    for name, instrument in bench.instruments.items() if bench else ():
        spec = registry.drivers.get(instrument.driver)
        if spec is not None and bench is not None:
            try:
                dialect_for(spec, bench.dialect_path(name))
            except FileProblemsError as error:
                problems += error.problems
    return problems


def _address_problems(bench: Bench | None) -> list[Problem]:
    """Return a problem for each address that is none; aliases, which other backends may know, are not judged."""
    if bench is None or bench.visa.backend != "py":
        return []
    source = read_source(bench.path)
    return [
        source.problem(("instruments", name, "address"), message)
        for name, instrument in bench.instruments.items()
        if (message := address_fault(instrument.address))
    ]
