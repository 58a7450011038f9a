"""Walking a program, action by action: from the beginning, or from any reading as if all before had been done.

To stand at a reading, each list around it is gone through up to it; of a sweep that is over its last round is, of a
sweep that it lies in the round before. That is enough, because a round sets the same names each time and from nothing
that an earlier round left behind (the survey refuses steps that would).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

from benchrun.contract.actions import Action, AskAction, ProcedureAction, ReadAction, SetAction, SettleAction
from benchrun.recipe.model import Place
from benchrun.schedule.program import Node, StepNode, SweepNode
from benchrun.schedule.scope import Scope
from benchrun.schedule.state import PROBE_FREQUENCY, State


@dataclass(frozen=True, slots=True)
class PlannedAction:
    """One action of the schedule: what is in force with it, the reading it takes (None: none), where it is written."""

    action: Action
    conditions: dict[str, float | str]
    reading_index: int | None
    position: Place


@dataclass(frozen=True, slots=True)
class _Event:
    """An action that was gone through in silence. `direct`: on the way to the reading, not in a round before it."""

    action: Action
    place: Place
    direct: bool


#: Called with the sweeps around and the round that begins, before each round of a sweep.
Foresight = Callable[[Sequence[tuple[SweepNode, int]]], None]


class Walk:
    """One walk. `foresee` is told of each round that is about to begin."""

    def __init__(self, state: State, scope: Scope, foresee: Foresight | None = None) -> None:
        self._state, self._scope, self._foresee = state, scope, foresee
        self._rounds: list[tuple[SweepNode, int]] = []
        self._events: list[_Event] = []
        self._index = 0
        scope.stand(state.values, state.words)

    def all_of(self, body: Sequence[Node]) -> Iterator[PlannedAction]:
        """Yield every action of a list."""
        for node in body:
            if isinstance(node, SweepNode):
                yield from self._rounds_of(node, 0)
            else:
                yield from self._step(node)

    def _rounds_of(self, node: SweepNode, first: int) -> Iterator[PlannedAction]:
        for k in range(first, len(node.axis)):
            self._look_ahead(node, k)
            for action in self._begin_round(node, k):
                yield self._planned(action, node.place)
            yield from self.all_of(node.body)
            self._rounds.pop()
        self._leave(node)

    def _begin_round(self, node: SweepNode, k: int) -> Iterator[Action]:
        self._rounds.append((node, k))
        value = node.axis.values[k]
        if node.axis.settable and not isinstance(value, str):
            action = self._state.apply(SetAction(((node.axis.name, value),)))
            if action is not None:
                yield action
        else:
            self._state.put(node.axis.name, value)

    def _look_ahead(self, node: SweepNode, k: int) -> None:
        if self._foresee is not None:
            self._foresee([*self._rounds, (node, k)])

    def _leave(self, node: SweepNode) -> None:
        if not node.axis.settable:
            self._state.leave(node.axis.name)

    def _expanded(self, node: StepNode) -> Iterator[Action]:
        """Expand a step as its actions are carried out, so that each sees what the one before it brought into force."""
        self._scope.begin(node.following)
        return self._scope.actions(node)

    def _step(self, node: StepNode) -> Iterator[PlannedAction]:
        yield from self._carried_out(self._expanded(node), node.place)

    def _carried_out(self, actions: Iterator[Action], place: Place) -> Iterator[PlannedAction]:
        for action in actions:
            done = self._state.apply(action)
            if done is not None:
                yield self._planned(done, place)

    def _planned(self, action: Action, place: Place) -> PlannedAction:
        conditions = self._state.conditions()
        if not isinstance(action, ReadAction):
            return PlannedAction(action, conditions, None, place)
        if action.capture is not None and action.capture.frequencies_hz != (self._state.values.get(PROBE_FREQUENCY),):
            conditions.pop(f"{PROBE_FREQUENCY}_hz", None)
        self._index += 1
        return PlannedAction(action, conditions, self._index - 1, place)

    # From a reading in the middle

    def from_reading(self, body: Sequence[Node], index: int) -> Iterator[PlannedAction]:
        """Yield what is needed to stand at a reading, that reading, and every action after it."""
        self._index = index
        yield from self._from(body, index)

    def after_last(self, body: Sequence[Node], last: int) -> Iterator[PlannedAction]:
        """Yield every action after the last reading, whose index is `last`."""
        passed = False
        for planned in self.from_reading(body, last):
            if passed:
                yield planned
            passed = passed or planned.reading_index == last

    def _from(self, body: Sequence[Node], left: int) -> Iterator[PlannedAction]:
        for position, node in enumerate(body):
            if left < node.readings:
                yield from self._into(node, left)
                yield from self.all_of(body[position + 1 :])
                return
            self._pass(node, direct=True)
            left -= node.readings

    def _into(self, node: Node, left: int) -> Iterator[PlannedAction]:
        if isinstance(node, StepNode):
            yield from self._into_step(node, left)
            return
        k, left = divmod(left, node.each)
        if k > 0:
            self._pass_round(node, k - 1, direct=False)
        self._look_ahead(node, k)
        for action in self._begin_round(node, k):
            self._events.append(_Event(action, node.place, direct=True))
        yield from self._from(node.body, left)
        self._rounds.pop()
        yield from self._rounds_of(node, k + 1)

    def _into_step(self, node: StepNode, left: int) -> Iterator[PlannedAction]:
        actions = self._expanded(node)
        for action in actions:
            if isinstance(action, ReadAction):
                left -= 1
                if left < 0:
                    yield from self._stand()
                    yield self._planned(action, node.place)
                    break
            self._note(action, node.place, direct=True)
        yield from self._carried_out(actions, node.place)

    def _pass(self, node: Node, *, direct: bool) -> None:
        """Go through a node in silence."""
        if isinstance(node, SweepNode):
            self._pass_round(node, len(node.axis) - 1, direct=False)
            self._leave(node)
            return
        for action in self._expanded(node):
            self._note(action, node.place, direct=direct)

    def _pass_round(self, node: SweepNode, k: int, *, direct: bool) -> None:
        for action in self._begin_round(node, k):
            self._events.append(_Event(action, node.place, direct))
        for inner in node.body:
            self._pass(inner, direct=direct)
        self._rounds.pop()

    def _note(self, action: Action, place: Place, *, direct: bool) -> None:
        done = self._state.apply(action)
        if done is not None:
            self._events.append(_Event(done, place, direct))

    def _stand(self) -> Iterator[PlannedAction]:
        """Yield of what was gone through what is still in force, in order; waits come last, when everything is set."""
        events, self._events = self._events, []
        for event in _still_in_force(events, self._state):
            yield self._planned(event.action, event.place)


def _still_in_force(events: Sequence[_Event], state: State) -> Iterator[_Event]:
    asks = [n for n, event in enumerate(events) if isinstance(event.action, AskAction)]
    reads = [n for n, event in enumerate(events) if isinstance(event.action, ReadAction)]
    after_asks, after_reads = max(asks, default=-1), max(reads, default=-1)
    last_set = {
        name: n
        for n, event in enumerate(events)
        if isinstance(event.action, SetAction)
        for name, _ in event.action.values
    }
    last_link = {
        e.action.connect[0]: n for n, e in enumerate(events) if isinstance(e.action, AskAction) and e.action.connect
    }
    waits = []
    for n, event in enumerate(events):
        action = event.action
        if isinstance(action, SetAction):
            kept = tuple((name, value) for name, value in action.values if last_set[name] == n and name in state.values)
            if kept:
                yield _Event(SetAction(kept), event.place, event.direct)
        elif isinstance(action, AskAction):
            if last_link[action.connect[0]] == n if action.connect else event.direct:
                yield event
        elif isinstance(action, ProcedureAction):
            if n > after_asks:
                yield event
        elif isinstance(action, SettleAction) and event.direct and (n > after_reads or not action.signals):
            waits.append(event)
    yield from waits
