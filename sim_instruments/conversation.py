"""The message exchange of one connection with one instrument (IEEE 488.2 section 6.3).

All transports talk through this: bytes in, response messages out. Where a transport knows of reading (in-process,
HiSLIP) an answer that was not read when the next message comes is lost (-410); on a plain stream answers queue up.
"""

from __future__ import annotations

from collections import deque
from dataclasses import dataclass
from enum import Enum

from .faults import Fault, mangled
from .rack import Rack
from .scpi_errors import ScpiError
from .scpi_framing import MessageSplitter
from .scpi_instrument import Instrument
from .scpi_status import MASTER_SUMMARY

FOREVER_NS = 24 * 3600 * 1_000_000_000  # what a read without time-out waits for an answer that never comes


class LinkLostError(Exception):
    """The connection broke."""


@dataclass(slots=True)
class Reply:
    """One response message: from when on it can be read, and whether END comes with its last byte."""

    data: bytes
    ready_ns: int = 0
    late_s: float = 0.0
    end: bool = True
    position: int = 0


class ReadEnd(Enum):
    """Why a read stopped."""

    END = "end"
    TERMINATION = "termination"
    COUNT = "count"
    TIMEOUT = "timeout"


class Conversation:
    """One client's connection. Callers hold no lock; every method takes the rack's."""

    def __init__(self, rack: Rack, name: str, *, message_based: bool) -> None:
        self.rack = rack
        self.name = name
        self.message_based = message_based
        self.replies: deque[Reply] = deque()
        self._splitter = MessageSplitter()
        self._boot = rack.boots[name]
        self._broken = False
        self._silenced = False
        self._summary = self._requested = False
        self._rises = 0

    @property
    def instrument(self) -> Instrument:
        """The instrument as it is now; the rack may have been restarted."""
        return self.rack.instruments[self.name]

    def _check_link(self) -> None:
        if self._broken or self.rack.boots[self.name] != self._boot:
            self._broken = True
            self.replies.clear()
            raise LinkLostError(self.name)

    # ---- messages ---------------------------------------------------------------------------------------------

    def write(self, data: bytes, *, end: bool) -> None:
        """Take bytes from the client; execute every message that they complete. Raises LinkLostError."""
        with self.rack.lock:
            self._check_link()
            try:
                messages = self._splitter.feed(data, end=end and self.message_based)
            except ScpiError as error:
                self.instrument.status.error(error.number, error.detail)
                return
            for message in messages:
                self._exchange(message)

    def interrupt(self) -> None:
        """A message came before the answer to the one before had been read."""
        self.replies.clear()
        self.instrument.status.error(-410)

    def _exchange(self, message: str) -> None:
        if self.message_based and self.replies:
            self.interrupt()
        self._silenced = False
        fault = self.rack.faults.draw(self.name)
        if fault is None:
            answer = self.instrument.execute(message)
            if answer:
                self.replies.append(Reply(answer))
        else:
            self._exchange_with(fault, message)
        if self.rack.listeners:
            self.rack.notice()

    def _exchange_with(self, fault: Fault, message: str) -> None:
        if fault.kind == "connection-reset":
            self._break()
        if fault.kind == "power-cycle":
            self.rack.power_cycle(self.name)
            self._break()
        if fault.kind == "no-answer":
            self._silenced = True
            return
        if fault.kind == "error-entry":  # before, so that a query of the queue in the same message finds it
            self.instrument.status.error(fault.number, fault.detail)
        answer = self.instrument.execute(message)
        if fault.kind == "reset-after":
            self._break()
        self._silenced = fault.kind == "lost-answer"
        if answer and not self._silenced:
            self.replies.append(self._spoilt(fault, answer))

    def _spoilt(self, fault: Fault, answer: bytes) -> Reply:
        reply = Reply(mangled(fault, answer), end=fault.kind != "half-block")
        if fault.kind == "late-answer":
            reply.late_s = fault.delay_s
            reply.ready_ns = self.instrument.now_ns + round(fault.delay_s * 1e9)
        return reply

    def _break(self) -> None:
        self._broken = True
        self.replies.clear()
        raise LinkLostError(self.name)

    def take(self) -> list[Reply]:
        """Return the replies and forget them: for a transport that sends them at once."""
        with self.rack.lock:
            taken = list(self.replies)
            self.replies.clear()
            return taken

    # ---- reading, in-process ----------------------------------------------------------------------------------

    def read(
        self, count: int, *, termination: bytes | None, ignore_end: bool, timeout_ns: int | None
    ) -> tuple[bytes, ReadEnd]:
        """Return at most `count` bytes and why there are no more. Waits in virtual time only. Raises LinkLostError."""
        with self.rack.lock:
            self._check_link()
            deadline_ns = self.instrument.now_ns + (FOREVER_NS if timeout_ns is None else timeout_ns)
            pieces: list[bytes] = []
            while True:
                piece, why = self._piece(count, termination, ignore_end, deadline_ns, started=bool(pieces))
                pieces.append(piece)
                count -= len(piece)
                if why is not None:
                    return b"".join(pieces), why

    def _piece(
        self, count: int, termination: bytes | None, ignore_end: bool, deadline_ns: int, *, started: bool
    ) -> tuple[bytes, ReadEnd | None]:
        if not self._wait_for_reply(deadline_ns, quiet=started):
            return b"", ReadEnd.TIMEOUT
        reply = self.replies[0]
        stop = min(reply.position + count, len(reply.data))
        at = reply.data.find(termination, reply.position, stop) if termination is not None else -1
        stop = at + 1 if at >= 0 else stop
        piece = reply.data[reply.position : stop]
        reply.position = stop
        whole = stop == len(reply.data)
        if whole:
            self.replies.popleft()
            self._silenced = not reply.end  # half an answer: the rest never comes
        if whole and reply.end and not ignore_end:
            return piece, ReadEnd.END
        if at >= 0:
            return piece, ReadEnd.TERMINATION
        return piece, ReadEnd.COUNT if len(piece) == count else None

    def _wait_for_reply(self, deadline_ns: int, *, quiet: bool) -> bool:
        now_ns = self.instrument.now_ns
        ready_ns = self.replies[0].ready_ns if self.replies else None
        if ready_ns is None and self.message_based and not (self._silenced or quiet):
            self.instrument.status.error(-420)
        arrives = ready_ns is not None and ready_ns <= deadline_ns
        until_ns = ready_ns if arrives and ready_ns is not None else deadline_ns
        if until_ns > now_ns:
            self.rack.advance(until_ns - now_ns)
        return arrives

    # ---- beside the messages ----------------------------------------------------------------------------------

    def clear(self) -> None:
        """Device clear (IEEE 488.2 5.8): both queues emptied, a pending *OPC forgotten. Raises LinkLostError."""
        with self.rack.lock:
            self._check_link()
            self._splitter.clear()
            self.replies.clear()
            self.instrument.forget_completion()

    def status_byte(self, *, message_available: bool | None = None) -> int:
        """Serial poll: bit 6 says whether service was requested since the last one. Raises LinkLostError."""
        with self.rack.lock:
            self._check_link()
            byte = self._look(message_available)
            requested, self._requested = self._requested, False
            return (byte & ~MASTER_SUMMARY) | (MASTER_SUMMARY if requested else 0)

    def service_requested(self) -> bool:
        """Whether a request for service is new since the last look; it stays for the serial poll."""
        with self.rack.lock:
            before = self._requested
            self._look(None)
            return self._requested and not before

    def summary_byte(self) -> int:
        """The status byte as a service request carries it: bit 6 set."""
        return self.instrument.status.byte(message_available=bool(self.replies)) | MASTER_SUMMARY

    def await_service(self, timeout_ns: int) -> bool:
        """Let virtual time pass until service is requested, at most `timeout_ns`."""
        with self.rack.lock:
            deadline_ns = self.instrument.now_ns + timeout_ns
            self._look(None)
            busy_until_ns = self.instrument.busy_until_ns
            for until_ns in (busy_until_ns if busy_until_ns is not None else deadline_ns, deadline_ns):
                if self._requested:
                    return True
                self.rack.advance(max(0, min(until_ns, deadline_ns) - self.instrument.now_ns))
                self._look(None)
            return self._requested

    def _look(self, message_available: bool | None) -> int:
        self.instrument.settle()
        now_ns = self.instrument.now_ns
        available = any(reply.ready_ns <= now_ns for reply in self.replies)
        byte = self.instrument.status.byte(
            message_available=available if message_available is None else message_available
        )
        summary = bool(byte & MASTER_SUMMARY)
        rises = self.instrument.service_rises
        rose = not self._summary or rises != self._rises
        self._requested = summary and (self._requested or rose)
        self._summary, self._rises = summary, rises
        return byte
