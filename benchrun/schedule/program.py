"""A schedule's program: steps and sweeps, nested as in the recipe, each with its number of readings. Never unrolled."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from benchrun.contract.actions import Action, AskAction, SetAction
from benchrun.contract.hooks import StepSpec
from benchrun.recipe import Step, Sweep
from benchrun.recipe.axis import Axis
from benchrun.recipe.model import Place


@dataclass(frozen=True, slots=True)
class ReadSite:
    """What a place that reads has in common at every condition: its name, the signals on, and what is read."""

    name: str
    signals: tuple[str, ...]
    waves: tuple[str, ...]
    scalars: tuple[str, ...]
    grid_hz: tuple[float, ...]
    """The receiver's own sweep, () where the reading is at the frequency in force."""
    follow: bool = False
    """Whether another source follows that sweep."""


@dataclass(slots=True, eq=False)
class StepNode:
    """One step. What stands below `place` is found by the survey, before anything is walked."""

    spec: StepSpec
    model: Any
    place: Place
    reads: tuple[ReadSite, ...] = ()
    following: tuple[str, ...] = ()
    """Signals of the next reading in the same list."""
    shape: tuple[str, ...] = ()
    """What kinds of actions it does, with the names that they set: the same at any conditions."""
    apart: bool = False
    """Whether anything stands between this step and that reading: what is in force there need not be in force here."""
    prompts: int = 0
    """How often the operator is asked each time."""
    changes: frozenset[str] = frozenset()
    """Full names that the step sets, and "connected.<plane>"."""
    uses: frozenset[str] = frozenset()
    """Conditions that its expansion looked at."""
    unbiases: bool = False
    """Whether bias is something else afterwards: an operator's action or a procedure."""

    @property
    def readings(self) -> int:
        """Number of readings that this step takes each time."""
        return len(self.reads)


@dataclass(slots=True, eq=False)
class SweepNode:
    """A sweep: its axis, and what is done at each value. `each` is the number of readings at one value."""

    axis: Axis
    place: Place
    body: tuple[Node, ...]
    each: int = 0

    @property
    def readings(self) -> int:
        """Number of readings of the whole sweep."""
        return self.each * len(self.axis)

    @property
    def changes(self) -> frozenset[str]:
        """Full names that are set in the sweep."""
        own = {self.axis.name} if self.axis.settable else set()
        return frozenset(own).union(*(node.changes for node in self.body))

    @property
    def unbiases(self) -> bool:
        """Whether bias is something else afterwards."""
        return any(node.unbiases for node in self.body)


Node = StepNode | SweepNode


@dataclass(frozen=True, slots=True)
class Site:
    """One place that reads, and the way to it: at each level of nesting the list, and the position in it.

    `sweeps` are the sweeps around it, outermost first; `offset` is the index of its first reading, `strides` how many
    readings lie between two values of each of those sweeps.
    """

    read: ReadSite
    lists: tuple[Sequence[Node], ...]
    positions: tuple[int, ...]
    nth: int
    sweeps: tuple[SweepNode, ...]
    offset: int
    strides: tuple[int, ...]

    @property
    def swept(self) -> tuple[str, ...]:
        """Names of what is swept around."""
        return tuple(sweep.axis.name for sweep in self.sweeps)


def shape_of(actions: Iterable[Action]) -> tuple[str, ...]:
    """Return the kinds of some actions, with the names that they set and the planes that they connect to."""
    return tuple(_kind_of(action) for action in actions)


def _kind_of(action: Action) -> str:
    if isinstance(action, SetAction):
        return f"sets {', '.join(name for name, _ in action.values)}"
    if isinstance(action, AskAction):
        return f"asks{f' to connect to {action.connect[0]}' if action.connect else ''}"
    return type(action).__name__.removesuffix("Action").lower() + "s"


def compiled(items: Sequence[Step | Sweep], steps: Mapping[str, StepSpec]) -> tuple[Node, ...]:
    """Return the nodes of an acquire part; the number of readings is not known before the survey."""
    return tuple(
        SweepNode(item.axis, item.at, compiled(item.do, steps))
        if isinstance(item, Sweep)
        else StepNode(steps[item.key], item.model, item.at)
        for item in items
    )


def count_readings(body: Sequence[Node]) -> int:
    """Count the readings of a list, and of every sweep in it."""
    for node in body:
        if isinstance(node, SweepNode):
            node.each = count_readings(node.body)
    return sum(node.readings for node in body)


def sites(
    body: Sequence[Node],
    lists: tuple[Sequence[Node], ...] = (),
    positions: tuple[int, ...] = (),
    sweeps: tuple[SweepNode, ...] = (),
    offset: int = 0,
) -> Iterator[Site]:
    """Yield every place that reads, in the recipe's order."""
    for position, node in enumerate(body):
        way = (*lists, body), (*positions, position)
        if isinstance(node, StepNode):
            strides = tuple(sweep.each for sweep in sweeps)
            for nth, read in enumerate(node.reads):
                yield Site(read, *way, nth, sweeps, offset + nth, strides)
        else:
            yield from sites(node.body, *way, (*sweeps, node), offset)
        offset += node.readings
