"""The acquire part: steps and sweeps, each against its model, the names of the bench, and what is swept around it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from benchrun.bench import Bench
from benchrun.contract.hooks import StepSpec
from benchrun.contract.kinds import Kind, Settable
from benchrun.errors import Problem, QuantityError
from benchrun.recipe.axis import Axis, read_axis
from benchrun.recipe.messages import nearest_first, no_such
from benchrun.recipe.model import Place, Step, Sweep
from benchrun.recipe.references import parse_sum, references_in
from benchrun.yaml_source import Path_, Placed, Source, check

SWEEP, DO, SET = "sweep", "do", "set"
#: What is swept around a step: names, and the kind of each ("text" for words, None where it could not be read).
Swept = Mapping[str, Kind | None]


class AcquireReader:
    """Reads lists of steps and gathers problems."""

    def __init__(self, source: Source, bench: Bench | None, steps: Mapping[str, StepSpec]) -> None:
        self.problems: list[Problem] = []
        #: Names of all readings, those of steps and sweeps with mistakes as well.
        self.readings: dict[str, None] = {}
        #: Whether steps were left out, so that what they would have done is not known.
        self.incomplete = False
        self._source = source
        self._steps = steps
        self._settables: dict[str, Settable] | None = bench.settables() if bench else None
        self._readables = bench.readables() if bench else {}

    def items(self, given: Any, path: Path_, swept: Swept | None = None) -> tuple[Step | Sweep, ...]:
        """Read a list of steps."""
        if not isinstance(given, list):
            self.incomplete = True
            if given is not None and path != ("acquire",):
                self._tell(path, "a list of steps is expected here, each beginning with a hyphen.")
            return ()
        read = [self._item(item, (*path, position), swept or {}) for position, item in enumerate(given)]
        return tuple(item for item in read if item is not None)

    def _item(self, given: Any, path: Path_, swept: Swept) -> Step | Sweep | None:
        if not isinstance(given, Placed) or not given:
            known = ", ".join(self._known())
            self.incomplete = True
            self._tell(path, f"a step is one key with its values, such as `- settle: 20 ms`; known: {known}.")
            return None
        if SWEEP in given:
            return self._sweep(given, path, swept)
        if len(given) > 1:
            self.incomplete = True
            message = f"one step has one key; this one has {', '.join(given)}. Begin each with a hyphen of its own."
            self._tell(path, message)
            return None
        return self._step(next(iter(given)), given, path, swept)

    def _known(self) -> list[str]:
        return [SWEEP, *self._steps]

    def _step(self, key: str, given: Placed, path: Path_, swept: Swept) -> Step | None:
        here, spec = (*path, key), self._steps.get(key)
        if spec is None:
            self._tell(here, no_such("step", key, self._known()), at_key=True)
            self.incomplete = True
            return None
        if isinstance(given[key], Placed) and isinstance(name := given[key].get("name"), str):
            self.readings[name] = None
        model, problems = check(self._source, spec.model, here, given[key])
        self.problems += problems
        self._check_references(given[key], here, swept)
        if key == SET and isinstance(given[key], Placed):
            for target, value in given[key].items():
                self._check_setting(target, value, (*here, target), swept)
        return None if model is None else Step(key, model, self._place(here))

    # References and settings

    def _check_references(self, given: Any, path: Path_, swept: Swept) -> None:
        """Every "{name}" is swept around this step, or is something that is set."""
        for where, text in _texts(given, path):
            for name in references_in(text):
                if name not in swept and self._settables is not None and name not in self._settables:
                    known = ", ".join(f"{{{one}}}" for one in swept) or "nothing"
                    self._tell(where, f"'{{{name}}}' refers to nothing here. What is swept around it: {known}.")

    def _check_setting(self, target: str, value: Any, path: Path_, swept: Swept) -> None:
        """The target can be set, and its value is a quantity of its kind or a sum of such quantities and references."""
        if self._settables is None:
            return
        settable = self._settables.get(target)
        if settable is None:
            self._tell(path, self._cannot_be_set(target), at_key=True)
            return
        try:
            total = parse_sum(str(value))
            total.evaluate(dict.fromkeys(total.references, 0.0), settable.kind)
        except QuantityError as error:
            self._tell(path, str(error))
            return
        for name in total.references:
            kind = swept.get(name)
            if kind is not None and not total.fits(name, kind, settable.kind):
                self._tell(path, f"'{{{name}}}' is a {kind}, and '{target}' is a {settable.kind}.")

    def _cannot_be_set(self, target: str) -> str:
        there = nearest_first(target, self._settables or ())
        if target in self._readables:
            return f"'{target}' can be read, not set. What can be set: {there}."
        return f"nothing on the bench is called '{target}'. It has {there}."

    # Sweeps

    def _sweep(self, given: Placed, path: Path_, swept: Swept) -> Sweep | None:
        here = (*path, SWEEP)
        for key in given:
            if key not in (SWEEP, DO):
                message = f"'{key}' is not known here. A sweep has the keys {SWEEP} and {DO}."
                self._tell((*path, key), message, at_key=True)
        over = given[SWEEP]
        if not isinstance(over, Placed) or len(over) != 1:
            example = "{drive: {from: 14 dBm, to: 30 dBm, step: 1 dB}}"
            self._tell(here, f"a sweep goes over one name, such as {example}; nest sweeps for more.")
            self.incomplete = True
            return None
        if not given.get(DO):
            self._tell(here, f"this sweep does nothing: `{DO}` with a list of steps is missing.", at_key=True)
            self.incomplete = True
            return None
        name = next(iter(over))
        axis = self._axis(name, over[name], (*here, name), given.get(DO), swept)
        around = {**swept, name: axis.kind if axis else None}
        do = self.items(given.get(DO), (*path, DO), around)
        return None if axis is None else Sweep(axis, do, self._place(here))

    def _axis(self, name: str, given: Any, path: Path_, do: Any, swept: Swept) -> Axis | None:
        settable = (self._settables or {}).get(name)
        if name in swept:
            self._tell(path, f"'{name}' is swept around this already.", at_key=True)
        elif self._settables is not None and settable is None and not _refers_to(name, do):
            self._tell(path, self._not_sweepable(name), at_key=True)
        kind = settable.kind if settable else None
        axis, wrong = read_axis(name, given, kind, settable=settable is not None)
        for within, message in wrong:
            self._tell((*path, *within), message)
        return axis

    def _not_sweepable(self, name: str) -> str:
        message = self._cannot_be_set(name)
        if "." in name or name in self._readables:
            return message
        return f'{message} A name of your own can be swept where a step inside refers to it: "{{{name}}}".'

    def _place(self, path: Path_) -> Place:
        return Place(self._source.file, *self._source.mark(path, at_key=True))

    def _tell(self, path: Path_, message: str, *, at_key: bool = False) -> None:
        self.problems.append(self._source.problem(path, message, at_key=at_key))


def _texts(given: Any, path: Path_) -> Iterator[tuple[Path_, str]]:
    """Yield every text in a part of a file, and its path."""
    if isinstance(given, str):
        yield path, given
    elif isinstance(given, Mapping):
        for key, value in given.items():
            yield from _texts(value, (*path, key))
    elif isinstance(given, list):
        for position, value in enumerate(given):
            yield from _texts(value, (*path, position))


def _refers_to(name: str, given: Any) -> bool:
    """Whether a part of a file refers to a name, in quotes as it should or without."""
    if isinstance(given, Mapping):
        return dict(given) == {name: None} or any(_refers_to(name, value) for value in given.values())
    if isinstance(given, list):
        return any(_refers_to(name, value) for value in given)
    return isinstance(given, str) and name in references_in(given)
