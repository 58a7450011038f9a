"""Values of a sweep: a list, or a range from one value to another, never written out."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any, cast, overload

from benchrun.contract.kinds import Kind
from benchrun.errors import QuantityError
from benchrun.quantities import UNITS, parse, show
from benchrun.recipe.references import DIFFERENCE

MOST_VALUES = 10_000_000
_WORD = re.compile(r"[A-Za-z][A-Za-z0-9-]*")


@dataclass(frozen=True, slots=True)
class Evenly(Sequence[float]):
    """`count` values from `start` to `stop`, both included, worked out one at a time."""

    start: float
    stop: float
    count: int

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
    """What a sweep goes over. `kind` is "text" where the values are words. `settable`: the values are set on the bench."""

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
            return {"name": self.name, "kind": self.kind, "from": values.start, "to": values.stop, "points": values.count}
        return {"name": self.name, "kind": self.kind, "values": list(values)}


def read_axis(name: str, given: Any, kind: Kind | None, *, settable: bool) -> Axis:
    """Read the values of a sweep over `name`; where `kind` is None it is found from their units. Raises QuantityError."""
    if isinstance(given, dict):
        return _range(name, given, kind, settable)
    if not isinstance(given, list) or not given:
        raise QuantityError(f"a sweep goes over a list, [1 V, 2 V], or a range, {{from: 1 V, to: 2 V, points: 11}}; not {given!r}")
    if kind is None and all(isinstance(value, str) and _WORD.fullmatch(value) for value in given):
        return Axis(name, "text", tuple(given), settable)
    found = kind or kind_of(given[0])
    return Axis(name, found, tuple(parse(value, found) for value in given), settable)


def kind_of(given: Any) -> Kind:
    """Return the kind of a quantity from its unit. Raises QuantityError where it has none that is known."""
    if isinstance(given, int | float) and not isinstance(given, bool):
        return "number"
    unit = str(given).strip().rpartition(" ")[2].lstrip("+-.0123456789")
    for kind, units in UNITS.items():
        if unit in units:
            return cast("Kind", kind)
    raise QuantityError(f"{given!r} is not a quantity with a unit, such as 2.2 GHz")


def _range(name: str, given: dict[str, Any], kind: Kind | None, settable: bool) -> Axis:
    if set(given) not in ({"from", "to", "step"}, {"from", "to", "points"}):
        raise QuantityError("a range has from, to and either step or points")
    found = kind or kind_of(given["from"])
    start, stop = parse(given["from"], found), parse(given["to"], found)
    count = _points(given["points"]) if "points" in given else _steps(given, start, stop, found)
    if count == 1 and start != stop:
        raise QuantityError("one point cannot reach from one value to another; use a list of one value")
    return Axis(name, found, Evenly(start, stop, count), settable)


def _points(given: Any) -> int:
    count = int(parse(given, "count"))
    if not 1 <= count <= MOST_VALUES:
        raise QuantityError(f"{count} points: a sweep has 1 to {MOST_VALUES}")
    return count


def _steps(given: dict[str, Any], start: float, stop: float, kind: Kind) -> int:
    step_kind = cast("Kind", DIFFERENCE.get(kind, kind))
    step = parse(given["step"], step_kind)
    if step <= 0.0:
        raise QuantityError(f"a step is written without a sign and is not 0; {given['step']!r} is neither")
    steps = abs(stop - start) / step
    whole = round(steps)
    if abs(steps - whole) > 1e-6 * max(whole, 1):
        last = start + (1 if stop > start else -1) * int(steps) * step
        raise QuantityError(
            f"steps of {show(step, step_kind)} from {given['from']} do not end at {given['to']}, but at {show(round(last, 9), kind)}: change one of them"
        )
    if whole >= MOST_VALUES:
        raise QuantityError(f"{whole + 1} points: a sweep has 1 to {MOST_VALUES}")
    return whole + 1
