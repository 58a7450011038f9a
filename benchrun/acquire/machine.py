"""The acquisition as a state machine without input or output: events in, commands out. The runner carries them out.

Rules kept here, whatever the runner, the instruments or the operator do:
1. RF is on only while radiating, reading and committing: never at rest, in a procedure, or with the operator about.
2. A reading that was taken is committed before anything else happens; only a failure leaves without it.
3. A stop is taken at a safe point: at rest, radiating, or with the operator; never within a reading.
4. The operator is asked only after RF and drain were seen off.
5. Every way out, good or bad, goes through making safe, and nothing leads back from there.
"""

from __future__ import annotations

from collections.abc import Mapping
from enum import IntEnum, auto
from functools import lru_cache
from typing import NamedTuple


class State(IntEnum):
    """Where an acquisition is."""

    RESTING = auto()  # RF off, drain off
    BIASED = auto()  # RF off, drain up
    RADIATING = auto()  # RF on for the signals that are wanted, and for no others
    READING = auto()
    COMMITTING = auto()
    WORKING = auto()  # a step's procedure has the bench; RF off
    LOWERING = auto()  # RF off, drain on its way down, before a prompt
    PROMPTING = auto()  # the operator has the bench
    MAKING_SAFE = auto()
    DONE = auto()
    UNSAFE = auto()


class Event(IntEnum):
    """What the runner wants, or tells of what it did."""

    RADIATE = auto()
    HOP = auto()
    REST = auto()
    READ = auto()
    TAKEN = auto()
    COMMITTED = auto()
    WORK = auto()
    WORKED = auto()
    ASK = auto()
    LOWERED = auto()
    ANSWERED = auto()
    END = auto()
    STOP = auto()
    FAIL = auto()
    CONFIRMED = auto()
    UNCONFIRMED = auto()


class Verb(IntEnum):
    """What the runner is to do."""

    RF_OFF = auto()
    RF_ON = auto()
    TAKE = auto()
    COMMIT = auto()
    WORK = auto()
    LOWER = auto()
    PROMPT = auto()
    MAKE_SAFE = auto()


class Command(NamedTuple):
    """A verb and, for RF, the signal."""

    verb: Verb
    signal: str = ""


Signals = tuple[str, ...] | frozenset[str]
#: Stands for RESTING or BIASED, whichever holds.
_REST = State.RESTING
_OUT = {Event.FAIL: State.MAKING_SAFE}
_SAFE_POINT = {Event.STOP: State.MAKING_SAFE, Event.END: State.MAKING_SAFE, **_OUT}
_BETWEEN = {
    Event.RADIATE: State.RADIATING,
    Event.REST: _REST,
    Event.READ: State.READING,
    Event.WORK: State.WORKING,
    Event.ASK: State.LOWERING,
    **_SAFE_POINT,
}
TRANSITIONS: Mapping[State, Mapping[Event, State]] = {
    State.RESTING: {**_BETWEEN, Event.HOP: _REST},
    State.BIASED: {**_BETWEEN, Event.HOP: _REST},
    State.RADIATING: {**_BETWEEN, Event.HOP: State.RADIATING},
    State.READING: {Event.TAKEN: State.COMMITTING, **_OUT},
    State.COMMITTING: {Event.COMMITTED: State.RADIATING, **_OUT},
    State.WORKING: {Event.WORKED: _REST, **_OUT},
    State.LOWERING: {Event.LOWERED: State.PROMPTING, **_OUT},
    State.PROMPTING: {Event.ANSWERED: _REST, Event.STOP: State.MAKING_SAFE, **_OUT},
    State.MAKING_SAFE: {Event.CONFIRMED: State.DONE, Event.UNCONFIRMED: State.UNSAFE},
    State.DONE: {},
    State.UNSAFE: {},
}
#: What follows an event beside RF.
COMMANDS: Mapping[Event, tuple[Command, ...]] = {
    Event.READ: (Command(Verb.TAKE),),
    Event.TAKEN: (Command(Verb.COMMIT),),
    Event.WORK: (Command(Verb.WORK),),
    Event.ASK: (Command(Verb.LOWER),),
    Event.LOWERED: (Command(Verb.PROMPT),),
    Event.END: (Command(Verb.MAKE_SAFE),),
    Event.STOP: (Command(Verb.MAKE_SAFE),),
    Event.FAIL: (Command(Verb.MAKE_SAFE),),
}
#: After HOP the signals named are off, after RADIATE they alone are on, after the others none is.
_SWITCHES = frozenset({Event.RADIATE, Event.HOP, Event.REST, Event.WORK, Event.ASK})
#: After these it is known whether a drain is up.
_BIAS = frozenset({Event.WORKED, Event.LOWERED})
#: What these mean depends on what is on.
_UNRESOLVED = frozenset({State.RADIATING, State.RESTING, State.DONE})


class _Way(NamedTuple):
    """What an event leads to, and whether that is all: no switching, no bias, no state to resolve."""

    state: State
    commands: tuple[Command, ...]
    plain: bool


def _way(event: Event, state: State) -> _Way:
    plain = event not in _SWITCHES | _BIAS and state not in _UNRESOLVED
    return _Way(state, COMMANDS.get(event, ()), plain)


_WAYS = {
    state: {event: _way(event, target) for event, target in events.items()} for state, events in TRANSITIONS.items()
}


class Machine:
    """Where an acquisition is, which signals are on, and what may come next."""

    def __init__(self) -> None:
        self.state = State.RESTING
        self.rf: frozenset[str] = frozenset()
        self.bias_up = False

    def feed(self, event: Event, signals: Signals = (), *, bias_up: bool = False) -> tuple[Command, ...]:
        """Take an event and return what is to be done now, in order.

        `signals` are those wanted on (RADIATE) or about to change frequency (HOP); `bias_up` says after WORKED whether
        the procedure left a drain on. Raises RuntimeError for an event that is not allowed here: a defect of ours.
        """
        way = _WAYS[self.state].get(event)
        if way is None:
            raise RuntimeError(f"{event.name} while {self.state.name}: the runner broke the order of an acquisition")
        state, commands, plain = way
        if plain:
            self.state = state
            return commands
        if event in _SWITCHES:
            self.rf, switching = _switched(self.rf, event, signals)
            commands = switching + commands
        elif event in _BIAS:
            self.bias_up = bias_up and event is Event.WORKED
        self.state = self._resolved(state)
        return commands

    def _resolved(self, state: State) -> State:
        """Return the state that a transition means: at rest or biased where no signal is on."""
        if state is State.RADIATING and self.rf:
            return state
        if state in (State.RADIATING, _REST):
            return State.BIASED if self.bias_up else State.RESTING
        if state is State.DONE:
            self.rf, self.bias_up = frozenset(), False
        return state


@lru_cache(maxsize=256)
def _switched(rf: frozenset[str], event: Event, signals: Signals) -> tuple[frozenset[str], tuple[Command, ...]]:
    """Return the signals that are on after an event, and the switching that leads there, off before on."""
    wanted: frozenset[str] = frozenset()
    if event is Event.RADIATE:
        wanted = frozenset(signals)
    elif event is Event.HOP:
        wanted = rf.difference(signals)
    off = [Command(Verb.RF_OFF, name) for name in sorted(rf - wanted)]
    on = [Command(Verb.RF_ON, name) for name in sorted(wanted - rf)]
    return wanted, (*off, *on)
