"""The state machine's rules, for any order of events that it allows and any failure on the way."""

from __future__ import annotations

import pytest
from hypothesis import settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, invariant, precondition, rule

from benchrun.acquire.machine import TRANSITIONS, Event, Machine, State, Verb

SIGNALS = ("probe", "pump", "second-pump")
#: Rule 1: where RF may be on. MAKING_SAFE is entered with RF on, to switch it off.
MAY_RADIATE = {State.RADIATING, State.READING, State.COMMITTING, State.MAKING_SAFE, State.UNSAFE}
some = st.frozensets(st.sampled_from(SIGNALS))


class AnyRun(RuleBasedStateMachine):
    """Drives a machine as a runner might, well or badly, and keeps an account of the bench of its own."""

    def __init__(self) -> None:
        super().__init__()
        self.machine = Machine()
        self.on: set[str] = set()
        self.taken = self.committed = 0
        self.left_by_failure = False
        self.made_safe = False

    def tell(self, event: Event, signals: frozenset[str] = frozenset(), **more: bool) -> None:
        before = self.machine.state
        if event not in TRANSITIONS[before]:
            with pytest.raises(RuntimeError, match=event.name):
                self.machine.feed(event, signals, **more)
            assert self.machine.state is before
            return
        for verb, signal in self.machine.feed(event, signals, **more):
            self.carry_out(verb, signal)
        if event is Event.FAIL and before is State.COMMITTING:
            self.left_by_failure = True

    def carry_out(self, verb: Verb, signal: str) -> None:
        if verb is Verb.RF_ON:
            assert signal not in self.on
            self.on.add(signal)
        elif verb is Verb.RF_OFF:
            self.on.remove(signal)
        elif verb is Verb.TAKE:
            self.taken += 1
        elif verb is Verb.COMMIT:
            self.committed += 1
        elif verb is Verb.PROMPT:
            assert not self.on
            assert not self.machine.bias_up
        elif verb is Verb.MAKE_SAFE:
            self.made_safe = True

    @rule(signals=some)
    def radiate(self, signals: frozenset[str]) -> None:
        self.tell(Event.RADIATE, signals)
        if self.machine.state is State.RADIATING:
            assert self.on == signals

    @rule(signals=some)
    def hop(self, signals: frozenset[str]) -> None:
        self.tell(Event.HOP, signals)
        if self.machine.state is State.RADIATING:
            assert not self.on & signals

    @rule(event=st.sampled_from([e for e in Event if e not in (Event.RADIATE, Event.HOP, Event.WORKED)]))
    def something_else(self, event: Event) -> None:
        self.tell(event)

    @rule(up=st.booleans())
    def worked(self, up: bool) -> None:
        self.tell(Event.WORKED, bias_up=up)

    @precondition(lambda self: self.machine.state in (State.RESTING, State.BIASED, State.RADIATING))
    @rule(signals=some)
    def whole_reading(self, signals: frozenset[str]) -> None:
        for event in (Event.RADIATE, Event.READ, Event.TAKEN, Event.COMMITTED):
            self.tell(event, signals)
        assert self.on == signals

    @invariant()
    def the_account_agrees(self) -> None:
        if self.machine.state is not State.DONE:
            assert self.machine.rf == self.on

    @invariant()
    def rf_is_never_on_at_rest(self) -> None:
        if self.machine.state not in MAY_RADIATE and self.machine.state is not State.DONE:
            assert not self.on

    @invariant()
    def nothing_is_left_before_it_is_committed(self) -> None:
        waiting = self.machine.state is State.READING
        assert self.taken - self.committed == waiting or self.made_safe

    @invariant()
    def every_way_out_passes_the_safe_state(self) -> None:
        out = self.machine.state in (State.MAKING_SAFE, State.DONE, State.UNSAFE)
        assert out == self.made_safe


TestAnyRun = AnyRun.TestCase
TestAnyRun.settings = settings(max_examples=200, stateful_step_count=40)


def test_nothing_leads_back_from_making_safe() -> None:
    seen, waiting = set(), {State.MAKING_SAFE}
    while waiting:
        state = waiting.pop()
        seen.add(state)
        waiting |= set(TRANSITIONS[state].values()) - seen
    assert seen == {State.MAKING_SAFE, State.DONE, State.UNSAFE}


def test_every_state_but_the_last_ones_can_fail() -> None:
    for state, events in TRANSITIONS.items():
        if state not in (State.MAKING_SAFE, State.DONE, State.UNSAFE):
            assert events[Event.FAIL] is State.MAKING_SAFE


def test_the_only_ways_into_the_end_are_from_making_safe() -> None:
    for state, events in TRANSITIONS.items():
        if state is not State.MAKING_SAFE:
            assert not {State.DONE, State.UNSAFE} & set(events.values())


def test_a_stop_is_no_event_within_a_reading_or_before_its_commit() -> None:
    for state in (State.READING, State.COMMITTING, State.WORKING, State.LOWERING):
        assert Event.STOP not in TRANSITIONS[state]


def test_a_machine_that_is_done_is_dark() -> None:
    machine = Machine()
    machine.feed(Event.RADIATE, ("pump",))
    machine.feed(Event.END)
    machine.feed(Event.CONFIRMED)
    assert (machine.state, machine.rf, machine.bias_up) == (State.DONE, frozenset(), False)


def test_a_biased_machine_rests_biased() -> None:
    machine = Machine()
    machine.feed(Event.WORK)
    machine.feed(Event.WORKED, bias_up=True)
    assert machine.state is State.BIASED
    machine.feed(Event.RADIATE, ("pump",))
    machine.feed(Event.REST)
    assert machine.state is State.BIASED
    machine.feed(Event.ASK)
    machine.feed(Event.LOWERED)
    machine.feed(Event.ANSWERED)
    assert machine.state is State.RESTING
