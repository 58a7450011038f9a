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

import threading
from collections import deque
from collections.abc import Callable, Sequence
from contextlib import suppress
from functools import partial
from typing import Any, Protocol, TypeVar

from benchrun.contract.capture import FloatArray
from benchrun.contract.clock import Clock
from benchrun.contract.roles import Call, Identity, Value
from benchrun.errors import BenchError, InstrumentError, LinkError, NoAnswerError, QuantityError, ReplyError
from benchrun.visa import levels, scpi
from benchrun.visa.dialect import Dialect
from benchrun.visa.exchange import (
    ERROR_QUERY,
    Answer,
    Exchange,
    Use,
    compose,
    join,
    read_values,
    take_apart,
    uses,
)

DEADLINE_S = 2.0
#: Asks for the standard events, and the bit that says that the instrument was switched on (IEEE 488.2 11.5.1.1.2).
EVENTS_QUERY = "*ESR?"
POWER_ON = 1 << 7
#: How long the error queue may take to say why an exchange was not answered.
EXPLAIN_S = 0.5
#: How long a query may take that only asks whether it is understood, and how long the error queue may then be waited
#: for.
PROBE_S = 0.25
LONG_PROBE_S = 3.0
#: Length of the shortest text behind a block, ;0,"" and a line feed; what this instrument says is learned.
SHORTEST_TAIL = 6
REMEMBERED = 64
#: How often a link is opened anew before it is given up.
REOPENINGS = 3
#: Entries read from an error queue before it counts as never empty.
LONGEST_QUEUE = 100


T = TypeVar("T")


class Wire(Protocol):
    """Bytes to and from one resource."""

    @property
    def where(self) -> str:
        """Name and address."""

    name: str

    def query(self, message: str, deadline_s: float) -> str:
        """Write a message, return the line that answers it."""

    def query_block(
        self, message: str, payload_bytes: int, tail_bytes: int, deadline_s: float
    ) -> tuple[memoryview | None, str]:
        """Write a message, return the block that answers it and the text behind it."""

    def reopen(self) -> None:
        """Close, open and clear."""

    def close(self) -> None:
        """Close."""


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
        self.exchanges: deque[Exchange] = deque(maxlen=REMEMBERED) if transcript is None else transcript
        self.suspect = False
        self.restarted = False
        self._watching = False
        self._seen_ns = 0
        self._tail_bytes = SHORTEST_TAIL
        self._wire = wire
        self._dialect = dialect
        self._clock = clock
        self._ceiling_dbm = ceiling_dbm
        self._ramp_db = ramp_db
        self._lock = threading.RLock()
        self._stands_dbm: dict[str, float] = {}

    @property
    def name(self) -> str:
        """Name of the instrument on the bench."""
        return self._wire.name

    @property
    def clock(self) -> Clock:
        """Clock to wait on."""
        return self._clock

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
        with self._lock:
            text = self._say(message, deadline_s or found.deadline_s or DEADLINE_S)
            return self._understood(message, lambda: found.read(text))

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
        with self._lock:
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
        with self._lock:
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
        with self._lock:
            self._fit_to_set([Use(found, values)])
            payload, text = self._say_block(message, 8 * count, deadline_s or found.deadline_s or DEADLINE_S)
            self._answer(message, text)
            if payload is None:
                raise self._garbled(message, ReplyError(f"a block was expected, {text[:40]!r} came"))
            return self._understood(message, lambda: scpi.parse_floats(payload, count))

    def identify(self) -> Identity:
        """Ask *IDN? (and *OPT? where the dialect says so), and put aside what others left in the error queue."""
        with self._lock:
            text = self._say("*IDN?", DEADLINE_S)
            maker, model, serial, firmware = self._understood("*IDN?", lambda: _four_fields(text))
            options = self._say("*OPT?", DEADLINE_S) if self._dialect.options else ""
            self._drain()
            self._see_restart(self._say(EVENTS_QUERY, DEADLINE_S))
            self.restarted = False
            return Identity(maker, model, serial, firmware, options.strip())

    def not_understood(self, entries: Sequence[str], *, enough: int | None = None) -> list[str]:
        """Return those entries whose query the instrument does not take for one, at most `enough`; nothing is set.

        Entries without a query form and those that answer in blocks are passed over. Only a command error (-199 to
        -100, SCPI-1999 volume 2 chapter 21) or silence means no: a query that was understood may still have nothing to
        tell. Raises LinkError where the link breaks.
        """
        found: list[str] = []
        for name in entries:
            if self._askable(name) and not self._understands([self._probe(name)], PROBE_S):
                found.append(name)
            if enough is not None and len(found) >= enough:
                break
        return found

    def understands_all(self, entries: Sequence[str]) -> bool:
        """Whether not_understood() would find nothing, asked in one message. Raises LinkError."""
        asks = [self._probe(name) for name in entries if self._askable(name)]
        deadline_s = sum(use.entry.deadline_s or PROBE_S for use in asks)
        return not asks or self._understands(asks, min(deadline_s, LONG_PROBE_S))

    def _askable(self, name: str) -> bool:
        entry = self._dialect.entries.get(name)
        return entry is not None and entry.ask is not None and entry.reply is not None and entry.reply.kind != "block"

    def _probe(self, name: str) -> Use:
        """Return an entry with 1 for each of its channels."""
        entry = self._dialect[name]
        return Use(entry, dict.fromkeys(entry.ask.names if entry.ask else (), 1))

    def _understands(self, asks: Sequence[Use], deadline_s: float) -> bool:
        """Whether queries are answered, or at least bring no command error in the time a slow one may need."""
        message = self._unsent(lambda: compose([], asks))
        with self._lock:
            try:
                entries = [take_apart(self._say(message, deadline_s, explain=False)).error]
            except (NoAnswerError, ReplyError):
                entries = []
            if not entries or entries[0].number:
                self.suspect = True
                try:
                    entries += self._queue(LONG_PROBE_S)
                except NoAnswerError:
                    return False
                except ReplyError:
                    return True  # the answer itself came, too late
            return not any(-200 < one.number <= -100 for one in entries)

    def reopen(self) -> None:
        """Open the link anew, clear it, and forget what was believed of the instrument.

        Raises LinkError, ReplyError.
        """
        with self._lock:
            self.suspect = True
            self._stands_dbm.clear()
            for _ in range(REOPENINGS):
                self._wire.reopen()
                if self._synchronised():
                    self._see_restart(self._wire.query(EVENTS_QUERY, DEADLINE_S))
                    self.suspect = False
                    return
            raise ReplyError(
                f"{self._wire.where}: answers out of turn, even on a fresh link. Check that nobody else talks to it"
            )

    def accept_restart(self) -> None:
        """Take settings again: whoever calls this prepares the instrument next."""
        self.restarted = False

    def close(self) -> None:
        """Close the link; twice does no harm."""
        with self._lock:
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

    @staticmethod
    def _level_key(use: Use) -> str:
        return use.entry.ask_text(use.values)

    # Exchanges

    def _now_ns(self) -> int:
        """Return the bench time; the last known where the clock is out of reach (a served rehearsal's is remote)."""
        with suppress(OSError):
            self._seen_ns = self._clock.now_ns()
        return self._seen_ns

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
        with self._lock:
            text = self._say(message, deadline_s)
            answer = self._answer(message, text)
            return self._understood(message, lambda: read_values(answer, bool(sets), asks))

    def _unsent(self, compose_message: Callable[[], str]) -> str:
        """Return a message composed from values; a bad value is refused here."""
        try:
            return compose_message()
        except (QuantityError, InstrumentError) as error:
            raise InstrumentError(f"{self._wire.where}: {error}. Nothing was sent") from None

    def _say(self, message: str, deadline_s: float, *, explain: bool = True) -> str:
        """Send a message and return its answer; the link is suspect if that fails."""
        if self.suspect:
            self.reopen()
        started_ns = self._now_ns()
        try:
            text = self._wire.query(message, deadline_s)
        except BaseException as error:
            self._failed(started_ns, message, error)
            if explain and isinstance(error, NoAnswerError):
                raise self._explained(error, message) from error
            raise
        self.exchanges.append(Exchange(started_ns, message, text, ""))
        return text

    def _say_block(self, message: str, payload_bytes: int, deadline_s: float) -> tuple[memoryview | None, str]:
        if self.suspect:
            self.reopen()
        started_ns = self._now_ns()
        try:
            payload, text = self._wire.query_block(message, payload_bytes, self._tail_bytes, deadline_s)
        except BaseException as error:
            self._failed(started_ns, message, error)
            if isinstance(error, NoAnswerError):
                raise self._explained(error, message) from error
            raise
        received = text if payload is None else f"(block of {len(payload)} bytes){text}"
        self.exchanges.append(Exchange(started_ns, message, received, ""))
        return payload, text.removeprefix(";")

    def _failed(self, started_ns: int, message: str, error: BaseException) -> None:
        self.suspect = True
        self.exchanges.append(Exchange(started_ns, message, "", str(error) or type(error).__name__))

    def _explained(self, error: BenchError, message: str) -> BenchError:
        """Return why there was no whole answer, where the error queue says so: a command error ends a message.

        Query errors (-499 to -400) tell only of the answer that did not come, or of this question about it.
        """
        try:
            entries = self._queue()
        except BenchError:
            return error
        telling = [entry for entry in entries if not -500 < entry.number <= -400]
        return self._complaint(telling, message) if telling else error

    def _queue(self, deadline_s: float = EXPLAIN_S) -> list[scpi.ErrorEntry]:
        """Read the error queue of a link as it is, until it is empty."""
        entries: list[scpi.ErrorEntry] = []
        while len(entries) < LONGEST_QUEUE:
            entry = scpi.parse_error(self._wire.query(ERROR_QUERY, deadline_s))
            if entry.number == 0:
                break
            entries.append(entry)
        return entries

    # Errors

    def _answer(self, message: str, text: str) -> Answer:
        """Take an answer apart. Raises InstrumentError for what the error queue holds, ReplyError for nonsense."""
        try:
            answer = take_apart(text)
        except ReplyError as error:
            raise self._explained(self._garbled(message, error), message) from error
        if answer.error.number:
            raise self._complaint(self._rest_of_queue(answer.error), message)
        self._tail_bytes = len(text) - text.rfind(";") + 1
        return answer

    def _understood(self, message: str, read: Callable[[], T]) -> T:
        """Return what `read` makes of an answer; an answer that makes no sense leaves the link suspect."""
        try:
            return read()
        except ReplyError as error:
            raise self._garbled(message, error) from error

    def _garbled(self, message: str, error: ReplyError) -> ReplyError:
        full = ReplyError(f"{self._wire.where}: answer to '{message}': {error}")
        self._failed(self._now_ns(), message, full)
        return full

    def _complaint(self, entries: Sequence[scpi.ErrorEntry], message: str) -> InstrumentError:
        """Return the entries of the error queue as one error."""
        listed = "; ".join(map(str, entries))
        error = InstrumentError(
            f"{self._wire.where}: reported {listed} after '{message}'. Compare the dialect with the instrument's manual"
        )
        self.exchanges.append(Exchange(self._now_ns(), message, listed, str(error)))
        return error

    def _rest_of_queue(self, first: scpi.ErrorEntry) -> list[scpi.ErrorEntry]:
        """Empty the error queue and return all of it, or what could be read of it."""
        try:
            return [first, *self._drain()]
        except BenchError:
            return [first]

    def _drain(self) -> list[scpi.ErrorEntry]:
        """Read the error queue until it is empty and return what was in it."""
        entries: list[scpi.ErrorEntry] = []
        while len(entries) < LONGEST_QUEUE:
            text = self._say(ERROR_QUERY, DEADLINE_S)
            entry = self._understood(ERROR_QUERY, partial(scpi.parse_error, text))
            if entry.number == 0:
                break
            entries.append(entry)
        return entries

    def _see_restart(self, text: str) -> None:
        """Note whether the instrument was switched on since this was last asked (PON, IEEE 488.2 11.5.1.1.2).

        The first answer tells of the time before this session, and only starts the watch.
        """
        events = self._understood(EVENTS_QUERY, partial(scpi.parse_number, text))
        self.restarted = self.restarted or (self._watching and bool(int(events) & POWER_ON))
        self._watching = True

    def _fit_to_set(self, wanted: Sequence[Use]) -> None:
        """Open a suspect link anew; raise InstrumentError where settings are lost, unless these only switch off."""
        if self.suspect:
            self.reopen()
        if self.restarted and not all(use.entry.switches_off(use.values) for use in wanted):
            raise InstrumentError(
                f"{self._wire.where}: was switched off and on, or restarted by itself, so its settings are gone. "
                "Nothing more is set until the bench has been prepared again"
            )

    def _synchronised(self) -> bool:
        """Read the error queue of a fresh link until it is empty; False where something else answers.

        What was in the queue belongs to the exchange that failed, and goes to the transcript only.
        """
        for _ in range(LONGEST_QUEUE):
            started_ns = self._now_ns()
            text = self._wire.query(ERROR_QUERY, DEADLINE_S)
            self.exchanges.append(Exchange(started_ns, ERROR_QUERY, text, "after opening the link anew"))
            try:
                if scpi.parse_error(text).number == 0:
                    return True
            except ReplyError:
                return False
        raise LinkError(
            f"{self._wire.where}: its error queue is never empty. Switch it off and on, with RF and drain off"
        )


def _four_fields(text: str) -> tuple[str, str, str, str]:
    """Read *IDN? (IEEE 488.2 10.14). Raises ReplyError for other than four fields."""
    fields = [part.strip() for part in text.split(",", 3)]
    if len(fields) != 4 or not fields[1]:
        raise ReplyError(f"*IDN? answers maker,model,serial,firmware; this says {text!r}")
    return fields[0], fields[1], fields[2], fields[3]
