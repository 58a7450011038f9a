"""A session with one instrument: dialect entries and typed values in, typed replies out. The only Link there is.

What it keeps:
- one exchange at a time, each with a deadline, the last ones remembered;
- what is set is seen completed (*OPC?), read back where asked for, and the error queue is emptied, in one message;
- a level above the ceiling is refused before anything is sent; a level rises by the ramp at most, from what was last
  read back;
- after a failed exchange the link is suspect: it is opened anew and cleared before the next use;
- an instrument that was switched off and on meanwhile has lost its settings: it is read and switched off, and nothing
  else, until it has been prepared again.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Collection, Sequence
from typing import Any

from benchrun.contract.capture import FloatArray
from benchrun.contract.clock import Clock
from benchrun.contract.roles import Call, Identity, Value
from benchrun.errors import InstrumentError, QuantityError, ReplyError
from benchrun.visa import levels, scpi
from benchrun.visa.conversation import DEADLINE_S, EVENTS_QUERY, Conversation, Wire
from benchrun.visa.dialect import Dialect
from benchrun.visa.exchange import ERROR_QUERY, Exchange, Use, compose, join, read_values, uses
from benchrun.visa.probe import Probe


class Session:
    """Link to one instrument (contract.roles.Link) over a wire and a dialect. Times in seconds, levels in dBm."""

    def __init__(
        self,
        wire: Wire,
        dialect: Dialect,
        *,
        clock: Clock,
        ceiling_dbm: float | None = None,
        ramp_db: float | None = None,
        transcript: deque[Exchange] | None = None,
    ) -> None:
        self._talk = Conversation(wire, clock, transcript)
        self._wire = wire
        self._dialect = dialect
        self._ceiling_dbm = ceiling_dbm
        self._ramp_db = ramp_db
        self._stands_dbm: dict[tuple[int, str], float] = {}

    @property
    def name(self) -> str:
        """Name of the instrument on the bench."""
        return self._wire.name

    @property
    def where(self) -> str:
        """Name and address, as messages begin."""
        return self._wire.where

    @property
    def clock(self) -> Clock:
        """Clock to wait on."""
        return self._talk.clock

    @property
    def exchanges(self) -> Collection[Exchange]:
        """The last exchanges, oldest first."""
        return self._talk.exchanges

    @property
    def suspect(self) -> bool:
        """Whether the last exchange failed, so that the link is opened anew before the next."""
        return self._talk.suspect

    @property
    def restarted(self) -> bool:
        """Whether the instrument was switched off and on, so that nothing is set before it has been prepared."""
        return self._talk.restarted

    def has(self, entry: str) -> bool:
        """Whether the dialect knows this entry."""
        return self._dialect.has(entry)

    def sweep_s(self, points: int, if_bandwidth_hz: float) -> float:
        """Return how long a sweep of so many readings through this filter takes, by the dialect's timing."""
        dialect = self._dialect
        return dialect.sweep_s + points * (dialect.point_s + dialect.filter_periods / if_bandwidth_hz)

    def query(self, entry: str, *, deadline_s: float | None = None, **values: Value) -> Any:
        """Return the typed reply to a query and nothing else: the error queue is left as it is. Raises BenchError."""
        found = self._dialect[entry]
        message = self._unsent(lambda: found.ask_text(values))
        with self._talk.lock:
            text = self._talk.say(message, deadline_s or found.deadline_s or DEADLINE_S)
            return self._talk.understood(message, lambda: found.read(text))

    def ask(self, entry: str, *, deadline_s: float | None = None, **values: Value) -> Any:
        """Return the typed reply to a query, and see that the error queue is empty. Raises BenchError."""
        return self._run([], uses(self._dialect, [(entry, values)]), deadline_s)[0]

    def send(self, entry: str, *, deadline_s: float | None = None, **values: Value) -> None:
        """Send the set form, see it completed and the error queue empty; a level is read back too.

        Raises BenchError.
        """
        if self._dialect[entry].level and self._dialect[entry].ask:
            self.confirm_all([(entry, values)], deadline_s=deadline_s)
        else:
            self.exchange([(entry, values)], deadline_s=deadline_s)

    def confirm(self, entry: str, *, deadline_s: float | None = None, **values: Value) -> Any:
        """Send the set form, read it back in the same message, and return what stands. Raises BenchError."""
        return self.confirm_all([(entry, values)], deadline_s=deadline_s)[0]

    def exchange(
        self, sets: Sequence[Call], asks: Sequence[Call] = (), *, deadline_s: float | None = None
    ) -> tuple[Any, ...]:
        """Send set forms, see them completed, and return the replies to queries, in one message. Raises BenchError.

        A single level is not taken here: confirm() raises it by the ramp and reads it back.
        """
        wanted = uses(self._dialect, sets)
        with self._talk.lock:
            self._fit_to_set(wanted)
            for use in wanted:
                if self._checked_levels(use) and use.entry.ask:
                    raise InstrumentError(
                        f"{self._wire.where}: {use.entry.name!r} carries a level: it is confirmed, not only sent"
                    )
            return self._run(wanted, uses(self._dialect, asks), deadline_s)

    def confirm_all(self, calls: Sequence[Call], *, deadline_s: float | None = None) -> tuple[Any, ...]:
        """Do confirm() for several entries in one message; returns what stands, in the same order.

        Raises BenchError.
        """
        if not calls:
            return ()
        wanted = uses(self._dialect, calls)
        with self._talk.lock:
            rising = [(use, self._checked_levels(use)) for use in wanted]
            self._fit_to_set(wanted)
            for use, several in rising:
                if len(several) == 1:
                    self._rise(use, several[0], deadline_s)
            return self._set_and_read_back(wanted, deadline_s)

    def block(self, entry: str, count: int, *, deadline_s: float | None = None, **values: Value) -> FloatArray:
        """Return exactly `count` float64 from a definite-length block, and see the error queue empty.

        Raises BenchError.
        """
        found = self._dialect[entry]
        message = self._unsent(lambda: join([found.ask_text(values), ERROR_QUERY]))
        with self._talk.lock:
            self._fit_to_set([Use(found, values)])
            payload, text = self._talk.say_block(message, 8 * count, deadline_s or found.deadline_s or DEADLINE_S)
            self._talk.answer(message, text)
            if payload is None:
                raise self._talk.garbled(message, ReplyError(f"a block was expected, {text[:40]!r} came"))
            return self._talk.understood(message, lambda: scpi.parse_floats(payload, count))

    def identify(self) -> Identity:
        """Ask *IDN? (and *OPT? where the dialect says so), and put aside what others left in the error queue."""
        with self._talk.lock:
            text = self._talk.say("*IDN?", DEADLINE_S)
            maker, model, serial, firmware = self._talk.understood("*IDN?", lambda: _four_fields(text))
            options = self._talk.say("*OPT?", DEADLINE_S) if self._dialect.options else ""
            self._talk.drain()
            self._talk.see_restart(self._talk.say(EVENTS_QUERY, DEADLINE_S))
            self._talk.restarted = False
            return Identity(maker, model, serial, firmware, options.strip())

    def not_understood(self, entries: Sequence[str], *, enough: int | None = None) -> list[str]:
        """Return those entries whose query the instrument does not take for one; nothing is set (see probe.py)."""
        return Probe(self._talk, self._dialect).not_understood(entries, enough)

    def understands_all(self, entries: Sequence[str]) -> bool:
        """Whether not_understood() would find nothing, asked in one message."""
        return Probe(self._talk, self._dialect).understands_all(entries)

    def reopen(self) -> None:
        """Open the link anew, clear it, and forget what was known of the instrument. Raises BenchError."""
        self._talk.reopen()

    def accept_restart(self) -> None:
        """Take settings again: whoever calls this prepares the instrument next."""
        self._talk.restarted = False

    def close(self) -> None:
        """Close the link; twice does no harm."""
        with self._talk.lock:
            self._wire.close()

    # Levels

    def _checked_levels(self, use: Use) -> tuple[float, ...]:
        """Return the levels that a use would set, () where it carries none.

        Raises InstrumentError before anything is sent.
        """
        if not use.entry.level or use.entry.level not in use.values:
            return ()
        try:
            found = levels.levels_of(use.values[use.entry.level])
            levels.check_ceiling(found, self._ceiling_dbm)
            levels.check_rises(found, self._ramp_db)
        except InstrumentError as error:
            raise InstrumentError(f"{self._wire.where}: {error}. Nothing was sent") from None
        return found

    def _rise(self, use: Use, target_dbm: float, deadline_s: float | None) -> None:
        """Raise a level by the ramp until the target is one step away."""
        key = self._level_key(use)
        if key not in self._stands_dbm:
            self._stands_dbm[key] = self._run([], [use], deadline_s)[0]
        for level in levels.rise(self._stands_dbm[key], target_dbm, self._ramp_db):
            self._set_and_read_back([Use(use.entry, {**use.values, use.entry.level: level})], deadline_s)

    def _level_key(self, use: Use) -> tuple[int, str]:
        """Key under which a level that was read back is known; each opening of the link begins with nothing known."""
        return self._talk.openings, use.entry.ask_text(use.values)

    # Exchanges

    def _set_and_read_back(self, wanted: Sequence[Use], deadline_s: float | None) -> tuple[Any, ...]:
        stands = self._run(wanted, wanted, deadline_s)
        for use, there in zip(wanted, stands, strict=True):
            if use.entry.level and isinstance(there, float):
                self._stands_dbm[self._level_key(use)] = there
        for use, there in zip(wanted, stands, strict=True):
            if use.entry.carried and not use.entry.agrees(use.values[use.entry.carried], there):
                raise InstrumentError(
                    f"{self._wire.where}: did not take '{use.entry.set_text(use.values)}': it now says {there!r}. "
                    "Check its front panel, and its limits in the bench file"
                )
        return stands

    def _run(self, sets: Sequence[Use], asks: Sequence[Use], deadline_s: float | None) -> tuple[Any, ...]:
        """Do one exchange and return the typed replies; the error queue is empty afterwards."""
        message = self._unsent(lambda: compose(sets, asks))
        deadline_s = deadline_s or max(use.entry.deadline_s or DEADLINE_S for use in (*sets, *asks))
        with self._talk.lock:
            text = self._talk.say(message, deadline_s)
            answer = self._talk.answer(message, text)
            return self._talk.understood(message, lambda: read_values(answer, bool(sets), asks))

    def _unsent(self, compose_message: Callable[[], str]) -> str:
        """Return a message composed from values; a bad value is refused here."""
        try:
            return compose_message()
        except (QuantityError, InstrumentError) as error:
            raise InstrumentError(f"{self._wire.where}: {error}. Nothing was sent") from None

    def _fit_to_set(self, wanted: Sequence[Use]) -> None:
        """Open a suspect link anew; raise InstrumentError where settings are lost, unless these only switch off."""
        if self._talk.suspect:
            self.reopen()
        if self._talk.restarted and not all(use.entry.switches_off(use.values) for use in wanted):
            raise InstrumentError(
                f"{self._wire.where}: was switched off and on, or restarted by itself, so its settings are gone. "
                "Nothing more is set until the bench has been prepared again"
            )


def _four_fields(text: str) -> tuple[str, str, str, str]:
    """Read *IDN? (IEEE 488.2 10.14). Raises ReplyError for other than four fields."""
    fields = [part.strip() for part in text.split(",", 3)]
    if len(fields) != 4 or not fields[1]:
        raise ReplyError(f"*IDN? answers maker,model,serial,firmware; this says {text!r}")
    return fields[0], fields[1], fields[2], fields[3]
