"""What a step sees while it expands: values in force, names of the bench, references. No input or output."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from functools import lru_cache

import numpy as np

from benchrun.bench import Bench
from benchrun.contract.actions import Action, SetAction
from benchrun.contract.kinds import Kind, Settable
from benchrun.errors import InputError, PluginError
from benchrun.quantities import parse, show
from benchrun.recipe import Recipe
from benchrun.recipe.references import DIFFERENCE, parse_sum, substitute
from benchrun.schedule.drive import DRIVE, Driver
from benchrun.schedule.program import StepNode


class Noted(Mapping[str, float]):
    """Values in force; notes what was looked at. The mappings are the walker's own, seen as they change."""

    def __init__(self, values: Mapping[str, float], words: Mapping[str, str]) -> None:
        self.values_, self.words, self.noted = values, words, set[str]()
        self.own: set[str] = set()
        """What the step has set itself: looking at that is no looking at what was there before."""

    def __getitem__(self, name: str) -> float:
        if name not in self.own:
            self.noted.add(name)
        return self.values_[name]

    def __iter__(self) -> Iterator[str]:
        return iter(self.values_)

    def __len__(self) -> int:
        return len(self.values_)


class Scope:
    """The StepScope that schedules give to steps (contract.hooks)."""

    def __init__(self, recipe: Recipe, bench: Bench, kinds: Mapping[str, Kind], driver: Driver | None) -> None:
        self._driver = driver
        self._settables = bench.settables()
        self._kinds = kinds
        self._signals, self._receivers = tuple(bench.signals), tuple(bench.receivers)
        self._receiver = recipe.receiver
        self._seen = Noted({}, {})
        self._following: tuple[str, ...] = ()

    def stand(self, values: Mapping[str, float], words: Mapping[str, str]) -> None:
        """Look at these values and words from now on."""
        self._seen = Noted(values, words)

    def begin(self, following: tuple[str, ...]) -> None:
        """Begin a step: nothing is noted yet."""
        self._seen.noted.clear()
        self._seen.own.clear()
        self._following = following

    def has_set(self, action: Action) -> None:
        """Note that the step has set something itself."""
        if isinstance(action, SetAction):
            self._seen.own.update(name for name, _ in action.values)

    def expanded(self, node: StepNode, numbers: Mapping[str, float], words: Mapping[str, str]) -> Iterator[Action]:
        """Expand a step for itself under these conditions; it sees what it has set."""
        values = dict(numbers)
        self.stand(values, words)
        self.begin(node.following)
        for action in self.actions(node):
            yield action
            if isinstance(action, SetAction):
                values.update(action.values)
                self.has_set(action)

    def actions(self, node: StepNode) -> Iterator[Action]:
        """Yield what a step expands to. Raises InputError; whatever else a step raises is a mistake in the step."""
        try:
            yield from node.spec.expand(node.model, self)
        except (InputError, GeneratorExit):
            raise
        except Exception as error:
            raise PluginError(f"step '{node.spec.key}' broke ({error!r}). Tell whoever wrote that step.") from error

    @property
    def noted(self) -> frozenset[str]:
        """Names of the conditions that the step looked at."""
        return frozenset(self._seen.noted)

    @property
    def conditions(self) -> Mapping[str, float]:
        """Values in force by full name, SI."""
        return self._seen

    @property
    def signals(self) -> tuple[str, ...]:
        """Names of the bench's signals."""
        return self._signals

    @property
    def receivers(self) -> tuple[str, ...]:
        """Names of the bench's receivers."""
        return self._receivers

    @property
    def if_bandwidth_hz(self) -> float:
        """The recipe's IF bandwidth."""
        return self._receiver.if_bandwidth

    @property
    def averages(self) -> int:
        """The recipe's averaging count."""
        return self._receiver.averages

    def following_read(self) -> tuple[str, ...]:
        """Signals that the next read step in the same list uses."""
        return self._following

    def value(self, text_or_number: str | float, target: str) -> float:
        """Resolve a quantity or a sum for a settable. Raises InputError without a value here, or out of range."""
        settable = self._settables.get(target)
        if settable is None:
            raise InputError(f"nothing that can be set is called '{target}'. It has {', '.join(self._settables)}.")
        if not isinstance(text_or_number, str):
            return in_range(parse(text_or_number, settable.kind), settable)
        constant, references = _summed(text_or_number, settable.kind)
        value = constant
        for sign, name in references:
            value += sign * self._reference(name, settable)
        return in_range(value, settable)

    def levels_dbm(self, signal: str, frequencies_hz: Sequence[float]) -> tuple[float, ...]:
        """Return the level at each frequency: that of the drive in force, else that in force. Raises InputError."""
        name, driver = f"{signal}.level", self._driver
        drive_dbm = self._seen.get(DRIVE) if driver is not None and name == driver.level else None
        if driver is not None and drive_dbm is not None:
            levels = driver.levels_dbm(np.full(len(frequencies_hz), drive_dbm), np.array(frequencies_hz)).tolist()
        elif name in self._seen:
            levels = [self._seen[name]] * len(frequencies_hz)
        else:
            raise InputError(f"{name} has no value here. Set it before this reading.")
        return tuple(in_range(level, self._settables[name]) for level in levels)

    def _reference(self, name: str, settable: Settable) -> float:
        kind = self._kinds.get(name)
        if kind not in (None, settable.kind, DIFFERENCE.get(settable.kind)):
            raise InputError(f"{{{name}}} is a {kind}, and {settable.name} is a {settable.kind}.")
        try:
            return self._seen[name]
        except KeyError:
            raise InputError(f"{{{name}}} has no value here. Set it before, or sweep it around this step.") from None

    def text(self, text: str) -> str:
        """Replace references to swept words. Raises InputError for what is no word here."""
        if "{" not in text:
            return text
        words = {name: word for name, word in self._seen.words.items() if "." not in name}
        self._seen.noted.update(words)
        return substitute(text, words)


@lru_cache(maxsize=4096)
def _summed(text: str, kind: Kind) -> tuple[float, tuple[tuple[float, str], ...]]:
    """Return a sum's constant part, and its references with their signs. Raises QuantityError."""
    read = parse_sum(text)
    constant = read.evaluate(dict.fromkeys(read.references, 0.0), kind)
    return constant, tuple((term.sign, term.reference) for term in read.terms if term.reference is not None)


def in_range(value: float, settable: Settable) -> float:
    """Return a value that its instrument takes. Raises InputError."""
    low, high = settable.low, settable.high
    if not math.isfinite(value):
        raise InputError(f"{settable.name} would be {value}, which is no value. Check the sum and what it refers to.")
    if (low is None or value >= low) and (high is None or value <= high):
        return value
    ends = " to ".join("any" if end is None else show(end, settable.kind) for end in (low, high))
    raise InputError(
        f"{settable.name} would be {show(value, settable.kind)}; the bench file allows {ends} (limits and ceiling). "
        "Change the recipe, or the bench file if the instrument can do it."
    )
