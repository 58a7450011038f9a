"""The conversation with one instrument: messages out, answers in, the error queue, and the way back after a failure.

After a failed exchange the link is suspect: it is opened anew, cleared and brought into step before the next message.
Knows messages and answers, and nothing of what they mean.
"""

from __future__ import annotations

import threading
from collections import deque
from collections.abc import Callable, Sequence
from contextlib import suppress
from functools import partial
from typing import Protocol, TypeVar

from benchrun.contract.clock import Clock
from benchrun.errors import BenchError, InstrumentError, LinkError, NoAnswerError, ReplyError
from benchrun.visa import scpi
from benchrun.visa.exchange import ERROR_QUERY, Answer, Exchange, take_apart

DEADLINE_S = 2.0
#: Asks for the standard events, and the bit that says that the instrument was switched on (IEEE 488.2 11.5.1.1.2).
EVENTS_QUERY = "*ESR?"
POWER_ON = 1 << 7
#: How long the error queue may take to say why an exchange was not answered.
EXPLAIN_S = 0.5
#: Length of the shortest text behind a block, ;0,"" and a line feed; what this instrument says is learned.
SHORTEST_TAIL = 6
REMEMBERED = 64
#: How often a link is opened anew before it is given up.
REOPENINGS = 3
#: Entries read from an error queue before it counts as never empty.
LONGEST_QUEUE = 100
CHECK_SCREEN = "Look at its own screen, and see that nobody else talks to it"
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


class Conversation:
    """What is said to one instrument and what it answers. `lock` is held by whoever talks."""

    def __init__(self, wire: Wire, clock: Clock, transcript: deque[Exchange] | None) -> None:
        self.wire = wire
        self.clock = clock
        self.lock = threading.RLock()
        self.exchanges: deque[Exchange] = deque(maxlen=REMEMBERED) if transcript is None else transcript
        self.suspect = False
        self.restarted = False
        self.openings = 0
        self._watching = False
        self._seen_ns = 0
        self._tail_bytes = SHORTEST_TAIL

    def now_ns(self) -> int:
        """Return the bench time; the last known where the clock is out of reach (a served rehearsal's is remote)."""
        with suppress(OSError):
            self._seen_ns = self.clock.now_ns()
        return self._seen_ns

    def say(self, message: str, deadline_s: float, *, explain: bool = True) -> str:
        """Send a message and return its answer; the link is suspect if that fails."""
        if self.suspect:
            self.reopen()
        started_ns = self.now_ns()
        try:
            text = self.wire.query(message, deadline_s)
        except BaseException as error:
            self._failed(started_ns, message, error)
            if explain and isinstance(error, NoAnswerError):
                raise self._explained(error, message) from error
            raise
        self.exchanges.append(Exchange(started_ns, message, text, ""))
        return text

    def say_block(self, message: str, payload_bytes: int, deadline_s: float) -> tuple[memoryview | None, str]:
        """Send a message and return the block that answers it and the text behind; suspect if that fails."""
        if self.suspect:
            self.reopen()
        started_ns = self.now_ns()
        try:
            payload, text = self.wire.query_block(message, payload_bytes, self._tail_bytes, deadline_s)
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
            entries = self.queue()
        except BenchError:
            return error
        telling = [entry for entry in entries if not -500 < entry.number <= -400]
        return self._complaint(telling, message) if telling else error

    def queue(self, deadline_s: float = EXPLAIN_S) -> list[scpi.ErrorEntry]:
        """Read the error queue of a link as it is, until it is empty."""
        entries: list[scpi.ErrorEntry] = []
        while len(entries) < LONGEST_QUEUE:
            entry = scpi.parse_error(self.wire.query(ERROR_QUERY, deadline_s))
            if entry.number == 0:
                break
            entries.append(entry)
        return entries

    def answer(self, message: str, text: str) -> Answer:
        """Take an answer apart. Raises InstrumentError for what the error queue holds, ReplyError for nonsense."""
        try:
            answer = take_apart(text)
        except ReplyError as error:
            raise self._explained(self.garbled(message, error), message) from error
        if answer.error.number:
            raise self._complaint(self._rest_of_queue(answer.error), message)
        self._tail_bytes = len(text) - text.rfind(";") + 1
        return answer

    def understood(self, message: str, read: Callable[[], T]) -> T:
        """Return what `read` makes of an answer; an answer that makes no sense leaves the link suspect."""
        try:
            return read()
        except ReplyError as error:
            raise self.garbled(message, error) from error

    def garbled(self, message: str, error: ReplyError) -> ReplyError:
        """Return the error of an answer that makes no sense, and hold the link suspect."""
        full = ReplyError(f"{self.wire.where}: answer to '{message}': {str(error).rstrip('.')}. {CHECK_SCREEN}")
        self._failed(self.now_ns(), message, full)
        return full

    def _complaint(self, entries: Sequence[scpi.ErrorEntry], message: str) -> InstrumentError:
        """Return the entries of the error queue as one error."""
        listed = "; ".join(map(str, entries))
        advice = scpi.advice(entries[0].number)
        error = InstrumentError(f"{self.wire.where}: reported {listed} after '{message}'. {advice}")
        self.exchanges.append(Exchange(self.now_ns(), message, listed, str(error)))
        return error

    def _rest_of_queue(self, first: scpi.ErrorEntry) -> list[scpi.ErrorEntry]:
        """Empty the error queue and return all of it, or what could be read of it."""
        try:
            return [first, *self.drain()]
        except BenchError:
            return [first]

    def drain(self) -> list[scpi.ErrorEntry]:
        """Read the error queue until it is empty and return what was in it."""
        entries: list[scpi.ErrorEntry] = []
        while len(entries) < LONGEST_QUEUE:
            text = self.say(ERROR_QUERY, DEADLINE_S)
            entry = self.understood(ERROR_QUERY, partial(scpi.parse_error, text))
            if entry.number == 0:
                break
            entries.append(entry)
        return entries

    def reopen(self) -> None:
        """Open the link anew, clear it, and forget what was believed of the instrument.

        Raises LinkError, ReplyError.
        """
        with self.lock:
            self.suspect = True
            self.openings += 1
            for _ in range(REOPENINGS):
                self.wire.reopen()
                if self._synchronised():
                    self.see_restart(self.wire.query(EVENTS_QUERY, DEADLINE_S))
                    self.suspect = False
                    return
            raise ReplyError(
                f"{self.wire.where}: answers out of turn, even on a fresh link. Check that nobody else talks to it"
            )

    def see_restart(self, text: str) -> None:
        """Note whether the instrument was switched on since this was last asked (PON, IEEE 488.2 11.5.1.1.2).

        The first answer tells of the time before this session, and only starts the watch.
        """
        events = self.understood(EVENTS_QUERY, partial(scpi.parse_number, text))
        self.restarted = self.restarted or (self._watching and bool(int(events) & POWER_ON))
        self._watching = True

    def _synchronised(self) -> bool:
        """Read the error queue of a fresh link until it is empty; False where something else answers.

        What was in the queue belongs to the exchange that failed, and goes to the transcript only.
        """
        for _ in range(LONGEST_QUEUE):
            started_ns = self.now_ns()
            text = self.wire.query(ERROR_QUERY, DEADLINE_S)
            self.exchanges.append(Exchange(started_ns, ERROR_QUERY, text, "after opening the link anew"))
            try:
                if scpi.parse_error(text).number == 0:
                    return True
            except ReplyError:
                return False
        raise LinkError(
            f"{self.wire.where}: its error queue is never empty. Switch it off and on, with RF and drain off"
        )
