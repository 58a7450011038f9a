"""The order of the safe state, without input or output.

Rules kept here:
1. Sources first, then a receiver looks for them, then drains, then gates.
2. A gate is offered only when every source and every drain is confirmed and no receiver sees RF: a depletion device
   whose gate is released under drain, or under drive, is lost. Otherwise gates are never touched.
3. What could not be confirmed is tried once more after all the others, and then named.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable
from enum import Enum, auto
from typing import NamedTuple


class Kind(Enum):
    """What is to be brought down."""

    SOURCE = auto()
    WITNESS = auto()
    DRAIN = auto()
    GATE = auto()


class Step(NamedTuple):
    """One thing to bring down and read back."""

    kind: Kind
    name: str


#: The look of a receiver whether RF is off.
WITNESS = Step(Kind.WITNESS, "RF off")


class Descent:
    """Says what to bring down next, given what has been confirmed so far."""

    def __init__(self, sources: Iterable[str], drains: Iterable[str], gates: Iterable[str]) -> None:
        first = [Step(Kind.SOURCE, name) for name in sources]
        self._waiting = deque([*first, WITNESS, *(Step(Kind.DRAIN, name) for name in drains)])
        self._gates = deque(Step(Kind.GATE, name) for name in gates)
        self._tried: set[Step] = set()
        self.confirmed: list[Step] = []
        self.unconfirmed: list[Step] = []

    def next(self) -> Step | None:
        """Return the next step, None when there is nothing more to be done."""
        if self._waiting:
            return self._waiting[0]
        if self.unconfirmed or not self._gates:
            return None
        return self._gates[0]

    def report(self, step: Step, *, confirmed: bool) -> None:
        """Tell whether the step that next() gave was read back as done."""
        if step != self.next():
            raise RuntimeError(f"{step.name} was not to be brought down now")
        (self._gates if step.kind is Kind.GATE else self._waiting).popleft()
        if confirmed:
            self.confirmed.append(step)
        elif step in self._tried or step.kind is Kind.GATE:
            self.unconfirmed.append(step)
        else:
            self._tried.add(step)
            self._waiting.append(step)

    @property
    def untouched(self) -> tuple[str, ...]:
        """Gates that were left as they are."""
        return tuple(step.name for step in self._gates)
