"""Values of a sweep: a list, or a range from one value to another, never written out."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, TypeVar, overload

from benchrun.contract.kinds import Kind
from benchrun.errors import QuantityError
from benchrun.quantities import kind_of, parse, show
from benchrun.recipe.references import DIFFERENCE
from benchrun.yaml_source import Path_

MOST_VALUES = 10_000_000
#: How far the last step may miss the end of a range, in steps: what decimal fractions lose in binary, and no more.
STEP_TOLERANCE = 1e-6
Got = TypeVar("Got")
_WORD = re.compile(r"[A-Za-z][A-Za-z0-9-]*")
_SHAPES = "a list, [1 V, 2 V], or a range, {from: 1 V, to: 2 V, points: 11} or {from: 1 V, to: 2 V, step: 0.1 V}"


@dataclass(frozen=True, slots=True)
class Evenly(Sequence[float]):
    """`count` values from `start` to `stop`, both included, worked out one at a time."""

    start: float
    stop: float
    count: int  # type: ignore[assignment]  # the number of values; nobody counts how often one occurs

    def __len__(self) -> int:
        return self.count

    @overload
    def __getitem__(self, index: int) -> float: ...
    @overload
    def __getitem__(self, index: slice) -> Sequence[float]: ...
    def __getitem__(self, index: int | slice) -> float | Sequence[float]:
        """Return the value at an index; the last one is `stop` exactly."""
        if isinstance(index, slice):
            return [self[i] for i in range(*index.indices(self.count))]
        if not -self.count <= index < self.count:
            raise IndexError(index)
        index %= self.count
        if index == self.count - 1:
            return self.stop
        return self.start + (self.stop - self.start) * index / (self.count - 1)

    def __iter__(self) -> Iterator[float]:
        return (self[i] for i in range(self.count))


@dataclass(frozen=True, slots=True)
class Axis:
    """What a sweep goes over. `kind` is "text" where the values are words; `settable`: they are set on the bench."""

    name: str
    kind: Kind
    values: Sequence[float] | Sequence[str]
    settable: bool

    def __len__(self) -> int:
        return len(self.values)

    def document(self) -> dict[str, Any]:
        """Return plain data for hashing."""
        values = self.values
        if isinstance(values, Evenly):
            start, stop, count = values.start, values.stop, values.count
            return {"name": self.name, "kind": self.kind, "from": start, "to": stop, "points": count}
        return {"name": self.name, "kind": self.kind, "values": list(values)}


#: A mistake in the values of a sweep: its way from the sweep's name, and what is wrong.
Wrong = tuple[Path_, str]


class _WrongError(Exception):
    """Mistakes on their way to read_axis(), which returns them."""

    def __init__(self, found: Sequence[Wrong]) -> None:
        super().__init__(found)
        self.found = list(found)


def read_axis(name: str, given: Any, kind: Kind | None, *, settable: bool) -> tuple[Axis | None, list[Wrong]]:
    """Read the values of a sweep over `name`: (axis, []) or (None, every mistake).

    Where `kind` is None it is found from the values' units.
    """
    try:
        return Axis(name, *_values(given, kind), settable), []
    except _WrongError as error:
        return None, error.found


def _values(given: Any, kind: Kind | None) -> tuple[Kind, Sequence[float] | Sequence[str]]:
    if isinstance(given, Mapping):
        return _range(given, kind)
    if not isinstance(given, list) or not given:
        raise _WrongError([((), f"a sweep goes over {_SHAPES}")])
    words = [value for value in given if isinstance(value, str) and _WORD.fullmatch(value)]
    if kind is None and len(words) == len(given):
        return "text", tuple(words)
    if kind is None and words:
        raise _WrongError([((), "a sweep goes over words or over quantities, not over both")])
    found, values = _read_all(dict(enumerate(given)), kind)
    return found, tuple(values.values())


def _read_all(given: Mapping[Any, Any], kind: Kind | None) -> tuple[Kind, dict[Any, float]]:
    """Read several quantities of one kind, by key; the kind is that of the first one that has one."""
    problems: list[Wrong] = []
    kinds: dict[Any, Kind] = {}
    for key, text in given.items():
        try:
            kinds[key] = kind or kind_of(text)
        except QuantityError as error:
            problems.append(((key,), str(error)))
    # One that lacks its unit is told by the kind of those that have one.
    found: Kind = next((one for one in kinds.values() if one != "number"), "number")
    values: dict[Any, float] = {}
    for key in kinds:
        try:
            values[key] = parse(given[key], found)
        except QuantityError as error:
            problems.append(((key,), str(error)))
    if problems:
        raise _WrongError(problems)
    return found, values


def _range(given: Mapping[str, Any], kind: Kind | None) -> tuple[Kind, Evenly]:
    if set(given) not in ({"from", "to", "step"}, {"from", "to", "points"}):
        raise _WrongError([((), f"a sweep goes over {_SHAPES}; here stands {', '.join(given) or 'nothing'}")])
    problems: list[Wrong] = []
    ends = _gather(problems, lambda: _read_all({"from": given["from"], "to": given["to"]}, kind))
    count = _gather(problems, lambda: _points(given["points"])) if "points" in given else None
    if ends is not None and "step" in given:
        count = _gather(problems, lambda: _steps(given, *ends))
    if problems or ends is None or count is None:
        raise _WrongError(problems)
    found, values = ends
    if count == 1 and values["from"] != values["to"]:
        raise _WrongError([(("points",), "one point cannot reach from one value to another; use a list")])
    return found, Evenly(values["from"], values["to"], count)


def _gather(problems: list[Wrong], read: Callable[[], Got]) -> Got | None:
    """Return what is read; None where it has mistakes, which are gathered."""
    try:
        return read()
    except _WrongError as error:
        problems.extend(error.found)
    return None


def _points(given: Any) -> int:
    try:
        count = int(parse(given, "count"))
    except QuantityError as error:
        raise _WrongError([(("points",), str(error))]) from None
    if not 1 <= count <= MOST_VALUES:
        raise _WrongError([(("points",), f"{count} points; a sweep has 1 to {MOST_VALUES}")])
    return count


def _steps(given: Mapping[str, Any], kind: Kind, ends: Mapping[str, float]) -> int:
    """Return the number of values of a range with a step; it must end where it says."""
    step_kind = DIFFERENCE.get(kind, kind)
    try:
        step = parse(given["step"], step_kind)
    except QuantityError as error:
        raise _WrongError([(("step",), str(error))]) from None
    if step <= 0.0:
        raise _WrongError([(("step",), f"'{given['step']}': a step is written without a sign, and is not 0")])
    span = ends["to"] - ends["from"]
    steps = abs(span) / step
    if steps >= MOST_VALUES:
        raise _WrongError([(("step",), f"{steps + 1:.0f} points; a sweep has 1 to {MOST_VALUES}")])
    if abs(steps - round(steps)) > STEP_TOLERANCE:
        last = show(round(ends["from"] + (step if span > 0 else -step) * int(steps), 9), kind)
        message = f"steps of {given['step']} from {given['from']} reach {last}, not {given['to']}: change one of them"
        raise _WrongError([(("step",), message)])
    return round(steps) + 1
