"""Read recipe files: the recipe, or all of its problems with their places."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any

from pydantic import BaseModel

from benchrun.bench import Bench
from benchrun.contract.hooks import StepSpec
from benchrun.errors import Problem, QuantityError
from benchrun.recipe.axis import Axis, read_axis
from benchrun.recipe.model import DERIVE, SAVE, Entry, HotMatch, LevelChain, Place, Recipe, RecipeFile, Step, Sweep, steps_of
from benchrun.recipe.references import references_in
from benchrun.yaml_source import Path_, Placed, Source, check, read_source


def recipe_source(path: Path) -> tuple[RecipeFile | None, Source, list[Problem]]:
    """Read a recipe's outer form: enough to know its bench, kit and calibrations."""
    source = read_source(path)
    if source.data is None:
        return None, source, source.problems
    file, problems = check(source, RecipeFile)
    return file, source, [*source.problems, *problems]


def load_recipe(path: Path, bench: Bench | None, steps: Mapping[str, StepSpec]) -> tuple[Recipe | None, list[Problem]]:
    """Read a *.recipe.yaml file against a bench: (recipe, []) or (None, all problems).

    `steps` are the installed step kinds by key. With `bench` None (the bench file itself has problems) names of the bench are not checked.
    """
    file, source, problems = recipe_source(path)
    reader = _Reader(source, bench, steps)
    data = source.data if isinstance(source.data, Placed) else {}
    acquire = reader.items(data.get("acquire"), ("acquire",), ())
    derive = reader.entries(data.get("derive"), "derive", DERIVE)
    save = reader.entries(data.get("save"), "save", SAVE)
    if file is not None:
        reader.cross_check(file, acquire, derive)
    problems += reader.problems
    if file is None or problems:
        return None, sorted(set(problems))
    return Recipe(file, acquire, derive, save, path.name, source.text, str(path)), []


class _Reader:
    """Goes through the lists of a recipe and gathers problems."""

    def __init__(self, source: Source, bench: Bench | None, steps: Mapping[str, StepSpec]) -> None:
        self.problems: list[Problem] = []
        self._source = source
        self._steps = steps
        self._settables = bench.settables() if bench else None
        self._readables = bench.readables() if bench else {}

    def items(self, given: Any, path: Path_, swept: tuple[str, ...]) -> tuple[Step | Sweep, ...]:
        """Read a list of steps."""
        if given is None:
            return ()
        if not isinstance(given, list) or not given:
            self._tell(path, "a list of steps is expected here, each beginning with a hyphen.")
            return ()
        read = [self._item(item, (*path, position), swept) for position, item in enumerate(given)]
        return tuple(item for item in read if item is not None)

    def _item(self, given: Any, path: Path_, swept: tuple[str, ...]) -> Step | Sweep | None:
        if not isinstance(given, Placed) or not given:
            self._tell(path, f"a step is one key with its values, such as `- settle: 20 ms`; known: {', '.join(self._known())}.")
            return None
        if "sweep" in given:
            return self._sweep(given, path, swept)
        if len(given) > 1:
            self._tell(path, f"one step has one key; this one has {', '.join(given)}. Begin each with a hyphen of its own.")
            return None
        return self._step(next(iter(given)), given, path, swept)

    def _known(self) -> list[str]:
        return ["sweep", *self._steps]

    def _step(self, key: str, given: Placed, path: Path_, swept: tuple[str, ...]) -> Step | None:
        spec = self._steps.get(key)
        if spec is None:
            self._tell((*path, key), _no_such("step", key, self._known()), at_key=True)
            return None
        model, problems = check(self._source, spec.model, (*path, key), given[key])
        self.problems += problems
        self._check_references(given[key], (*path, key), swept)
        if key == "set":
            self._check_targets(given[key], (*path, key))
        return None if model is None else Step(key, model, self._place((*path, key), at_key=True))

    def _check_targets(self, given: Any, path: Path_) -> None:
        for target in given if isinstance(given, Placed) else ():
            self._check_target(target, (*path, target), self._settables or {})

    def _check_target(self, target: str, path: Path_, settables: Mapping[str, object]) -> None:
        if self._settables is None or target in settables:
            return
        self._tell(path, self._cannot_be_set(target), at_key=True)

    def _cannot_be_set(self, target: str) -> str:
        if target in self._readables:
            return f"'{target}' can be read, not set. What can be set: {', '.join(self._settables or ())}."
        return f"nothing on the bench is called '{target}'. It has {', '.join(self._settables or ())}."

    def _check_references(self, given: Any, path: Path_, swept: tuple[str, ...]) -> None:
        if isinstance(given, Placed):
            for key, value in given.items():
                self._check_references(value, (*path, key), swept)
        elif isinstance(given, list):
            for position, value in enumerate(given):
                self._check_references(value, (*path, position), swept)
        elif isinstance(given, str):
            for name in references_in(given):
                if name not in swept and name not in (self._settables or {name: None}):
                    known = ", ".join(f"{{{known}}}" for known in swept) or "nothing"
                    self._tell(path, f"'{{{name}}}' refers to nothing here. What is swept around it: {known}.")

    def _sweep(self, given: Placed, path: Path_, swept: tuple[str, ...]) -> Sweep | None:
        for key in given:
            if key not in ("sweep", "do"):
                self._tell((*path, key), f"'{key}' is not known here. A sweep has the keys sweep and do.", at_key=True)
        over = given["sweep"]
        if not isinstance(over, Placed) or len(over) != 1:
            self._tell((*path, "sweep"), "a sweep goes over one name, such as {drive: {from: 14 dBm, to: 30 dBm, step: 1 dB}}; nest sweeps for more.")
            return None
        name = next(iter(over))
        if "do" not in given:
            self._tell((*path, "sweep"), "this sweep does nothing: 'do' with a list of steps is missing beside it.", at_key=True)
        do = self.items(given.get("do"), (*path, "do"), (*swept, name))
        axis = self._axis(name, over[name], (*path, "sweep", name), given.get("do"), swept)
        return None if axis is None else Sweep(axis, do, self._place((*path, "sweep"), at_key=True))

    def _axis(self, name: str, given: Any, path: Path_, do: Any, swept: tuple[str, ...]) -> Axis | None:
        settable = (self._settables or {}).get(name)
        if name in swept:
            self._tell(path, f"'{name}' is swept around this already.", at_key=True)
        elif self._settables is not None and settable is None and name not in _all_references(do):
            self._tell(path, self._not_sweepable(name), at_key=True)
        try:
            return read_axis(name, given, settable.kind if settable else None, settable=settable is not None)
        except QuantityError as error:
            self._tell(path, f"{error}.")
            return None

    def _not_sweepable(self, name: str) -> str:
        if "." in name or name in self._readables:
            return self._cannot_be_set(name)
        return f"{self._cannot_be_set(name)} A name of your own can be swept where a step inside refers to it as {{{name}}}."

    def entries(self, given: Any, part: str, models: Mapping[str, type[BaseModel]]) -> tuple[Entry, ...]:
        """Read a derive or save part."""
        read = []
        for position, item in enumerate(given if isinstance(given, list) else ()):
            path: Path_ = (part, position)
            if not isinstance(item, Placed) or len(item) != 1:
                self._tell(path, f"an entry of {part} is one key with its values; known: {', '.join(models)}.")
                continue
            kind = next(iter(item))
            if kind not in models:
                self._tell((*path, kind), _no_such(f"entry of {part}", kind, models), at_key=True)
                continue
            model, problems = check(self._source, models[kind], (*path, kind), {} if item[kind] is None else item[kind])
            self.problems += problems
            if model is not None:
                read.append(Entry(kind, model, self._place((*path, kind), at_key=True)))
        return tuple(read)

    def cross_check(self, file: RecipeFile, acquire: Sequence[Step | Sweep], derive: Sequence[Entry]) -> None:
        """Check what the parts say of each other: readings that nobody takes, calibrations that nobody makes, a missing kit."""
        readings = {str(getattr(step.model, "name", "")) for step in steps_of(acquire) if step.key == "read"}
        for entry in derive:
            for field in ("readings", "standards", "power"):
                name = getattr(entry.model, field, None)
                if name is not None and name not in readings:
                    self._at(entry, f"{entry.kind}: {_no_such('reading', name, readings)}")
            self._check_calibration(file, entry)
            if entry.kind == "calibrate" and file.kit is None:
                self._at(entry, "calibrate: no kit is named; write `kit: FILE.kit.yaml` at the top of the recipe.")

    def _check_calibration(self, file: RecipeFile, entry: Entry) -> None:
        name = getattr(entry.model, "calibration", None) or (entry.model.drive if isinstance(entry.model, HotMatch) else None)
        if name is not None and name not in file.calibrations:
            self._at(entry, f"{entry.kind}: {_no_such('calibration', name, file.calibrations)} Name the recipe that makes it under `calibrations:`.")
        if isinstance(entry.model, LevelChain) and self._settables is not None and f"{entry.model.signal}.level" not in self._settables:
            self._at(entry, f"level: the bench has no signal '{entry.model.signal}'.")

    def _at(self, entry: Entry, message: str) -> None:
        self.problems.append(entry.at.problem(message))

    def _place(self, path: Path_, *, at_key: bool = False) -> Place:
        return Place(self._source.file, *self._source.mark(path, at_key=at_key))

    def _tell(self, path: Path_, message: str, *, at_key: bool = False) -> None:
        self.problems.append(self._source.problem(path, message, at_key=at_key))


def _all_references(given: Any) -> set[str]:
    if isinstance(given, Mapping):
        return set().union(*(_all_references(value) for value in given.values())) if given else set()
    if isinstance(given, list):
        return set().union(*(_all_references(value) for value in given)) if given else set()
    return set(references_in(given)) if isinstance(given, str) else set()


def _no_such(what: str, name: str, known: Iterable[str]) -> str:
    names = list(known)
    near = difflib.get_close_matches(name, names, n=1)
    meant = f" Did you mean '{near[0]}'?" if near else ""
    return f"there is no {what} '{name}'.{meant} There is: {', '.join(names) or 'none'}."
