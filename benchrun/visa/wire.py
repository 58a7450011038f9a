"""Bytes to and from one instrument over pyvisa: deadlines kept, every error of the libraries mapped to ours.

Known of the libraries, and met here:
- pyvisa-py's raw socket opens a refused port without complaint, and holds small writes back (Nagle) until TCP_NODELAY
  is set;
- the terminator is off while a block is read by its count: a line feed among the data ends nothing, and nothing is
  searched for;
- after a time-out a link is opened anew and cleared before it is used again.
"""

from __future__ import annotations

import contextlib
import errno
import os
import socket
import time
from typing import Any

import pyvisa
from pyvisa.constants import ResourceAttribute, StatusCode
from pyvisa.resources import SerialInstrument, TCPIPSocket

from benchrun.errors import BenchError, LinkError, NoAnswerError, ReplyError
from benchrun.visa import scpi

#: Bytes asked for in one read of text; an answer may be longer.
CHUNK = 16384
#: Bytes that pyvisa-py takes from a raw socket at once (its own 4096 costs a block 20 % of its time).
SOCKET_CHUNK = 1 << 17
OPEN_DEADLINE_S = 5.0
QUIET = (StatusCode.success_max_count_read, StatusCode.success_device_not_present)


class Wire:
    """Bytes to and from one resource, over pyvisa.

    Every failure is a LinkError, NoAnswerError or ReplyError that says where.
    """

    def __init__(self, manager: pyvisa.ResourceManager, name: str, address: str) -> None:
        self.name = name
        self.address = address
        self._manager = manager
        self._library: Any = manager.visalib
        self._resource: Any = None
        self._handle: Any = None
        self._timeout_ms = -1
        self._by_line = False
        self._promised = 0
        self._quiet = contextlib.ExitStack()

    @property
    def where(self) -> str:
        """Name and address, as messages begin."""
        return f"{self.name} ({self.address})"

    def open(self) -> None:
        """Open the resource. Raises LinkError where nothing listens or the address is none."""
        try:
            self._resource = self._manager.open_resource(self.address, open_timeout=int(OPEN_DEADLINE_S * 1000))
            self._handle = self._resource.session
            self._quiet.enter_context(self._resource.ignore_warning(*QUIET))
            self._tune_socket()
            self._by_line = self._ends_at_line_feeds()
            self._terminate(True)
        except Exception as error:
            self.close()
            raise self._cannot_open(error) from error

    def _ends_at_line_feeds(self) -> bool:
        """Whether a message ends at its line feed: on sockets and serial lines; all other links have an END."""
        return isinstance(self._resource, SerialInstrument | TCPIPSocket)

    def _tune_socket(self) -> None:
        """Send small writes at once, and see a refused connection now: for pyvisa-py's raw sockets alone."""
        line = self._socket()
        if line is None:
            return
        refused = line.getsockopt(socket.SOL_SOCKET, socket.SO_ERROR)
        if refused:
            raise OSError(refused, os.strerror(refused))
        line.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self._library.sessions[self._handle].max_recv_size = SOCKET_CHUNK

    def _socket(self) -> socket.socket | None:
        session = getattr(self._library, "sessions", {}).get(self._handle)
        line = getattr(session, "interface", None)
        return line if isinstance(line, socket.socket) else None

    def _cannot_open(self, error: Exception) -> LinkError:
        code = getattr(error, "error_code", None)
        if code == StatusCode.error_invalid_resource_name:
            return LinkError(
                f"{self.name}: {self.address!r} is not a VISA address (such as TCPIP0::192.0.2.21::hislip0::INSTR)"
            )
        if isinstance(error, ValueError):  # pyvisa-py, where a package for this kind of link is not installed
            return LinkError(
                f"{self.where}: this computer cannot open such an address yet ({reason(error)}). Install that, or name "
                "another backend in the bench file (visa: {backend: ...})"
            )
        return LinkError(
            f"{self.where}: cannot be opened, nothing answers there ({reason(error)}). "
            "Check that it is on, the cable, and the address"
        )

    def close(self) -> None:
        """Close the resource; nothing happens where it is closed already or the link is beyond closing."""
        resource, self._resource, self._handle, self._timeout_ms = self._resource, None, None, -1
        with contextlib.suppress(Exception):
            self._quiet.close()
        with contextlib.suppress(Exception):
            if resource is not None:
                resource.close()

    def reopen(self) -> None:
        """Close, open and clear: nothing of an exchange that failed is left in the link. Raises LinkError."""
        self.close()
        self.open()
        try:
            self._resource.clear()
        except Exception:
            self.close()
            self.open()

    def query(self, message: str, deadline_s: float) -> str:
        """Write a message and return the line that answers it. Raises LinkError, NoAnswerError, ReplyError."""
        ends = time.monotonic() + deadline_s
        try:
            self._write(message, deadline_s)
            answer = self._read_line(ends)
        except Exception as error:
            raise self._failed(error, message, deadline_s) from error
        return self._text(answer, message)

    def query_block(
        self, message: str, payload_bytes: int, tail_bytes: int, deadline_s: float
    ) -> tuple[memoryview | None, str]:
        """Write a message and return the block that answers it, and the text behind it.

        `tail_bytes` is how long that text is at least; it comes with the payload in one read. (None, text) where the
        answer is no block: the instrument had an error to tell of. Raises ReplyError for a block that is shorter than
        its header says or of another length, and as query() does.
        """
        ends = time.monotonic() + deadline_s
        try:
            self._write(message, deadline_s)
            self._terminate(False)
            head = self._read_exactly(2 + len(str(payload_bytes)), ends)
            payload, tail = (
                self._read_block(head, payload_bytes, tail_bytes, ends) if head[:1] == b"#" else (None, head)
            )
            self._terminate(True)
            if tail[-1:] != b"\n":
                tail += self._read_line(ends)
            self._see_end(payload, tail)
        except Exception as error:
            raise self._failed(error, message, deadline_s) from error
        finally:
            self._promised = 0
        return payload, self._text(tail, message)

    def _read_block(self, head: bytes, expected: int, tail_bytes: int, ends: float) -> tuple[memoryview, bytes]:
        """Return payload and tail of a block of which as many bytes were read as its shortest header has."""
        start = 2 + scpi.block_digits(head)
        if start > len(head):
            head += self._read_exactly(start - len(head), ends)
        length = scpi.block_length(head[2:start]) if start > 2 else expected
        if length != expected:
            raise ReplyError(f"the block's header says {length} bytes, {expected} were expected")
        self._promised = length
        data = self._read_exactly(length + start - len(head) + tail_bytes, ends)
        if start < len(head):
            data = head[start:] + data
        if len(data) < length:
            raise ReplyError(f"the block's header says {length} bytes, {len(data)} arrived")
        return memoryview(data)[:length], data[length:]

    @staticmethod
    def _see_end(payload: memoryview | None, tail: bytes) -> None:
        """A block that is shorter than it says swallows what follows it: so what follows must begin as it should."""
        if payload is not None and tail[:1] != b";":
            raise ReplyError(
                f"the block's header says {len(payload)} bytes, and its end is not there: fewer or more arrived"
            )

    def _write(self, message: str, deadline_s: float) -> None:
        if self._handle is None:
            raise LinkError(f"{self.where}: the link is closed")
        milliseconds = max(1, round(deadline_s * 1000))
        if milliseconds != self._timeout_ms:
            self._resource.timeout = milliseconds
            self._timeout_ms = milliseconds
        self._library.write(self._handle, message.encode("ascii") + b"\n")

    def _read_line(self, ends: float) -> bytes:
        chunk, status = self._library.read(self._handle, CHUNK)
        if status != StatusCode.success_max_count_read:
            return bytes(chunk)
        line = bytearray(chunk)
        while status == StatusCode.success_max_count_read and not line.endswith(b"\n"):
            self._in_time(ends)
            chunk, status = self._library.read(self._handle, CHUNK)
            line += chunk
        return bytes(line)

    def _read_exactly(self, count: int, ends: float) -> bytes:
        """Return `count` bytes, fewer only where the instrument ended its message early."""
        chunk, status = self._library.read(self._handle, count)
        if len(chunk) == count:
            return bytes(chunk)
        data = bytearray(chunk)
        while len(data) < count and (status == StatusCode.success_max_count_read or self._by_line):
            self._in_time(ends)
            chunk, status = self._library.read(self._handle, count - len(data))
            data += chunk
        return bytes(data)

    @staticmethod
    def _in_time(ends: float) -> None:
        if time.monotonic() > ends:
            raise TimeoutError

    def _terminate(self, on: bool) -> None:
        if self._by_line:
            self._resource.set_visa_attribute(ResourceAttribute.termchar_enabled, on)

    def _text(self, answer: bytes, message: str) -> str:
        try:
            return answer.decode("ascii").rstrip("\r\n")
        except UnicodeDecodeError as error:
            raise ReplyError(
                f"{self.where}: the answer to '{message}' is garbled: {answer[:40]!r}. {CHECK_LINE}"
            ) from error

    def _failed(self, error: Exception, message: str, deadline_s: float) -> BenchError:
        if isinstance(error, ReplyError):
            return ReplyError(f"{self.where}: answer to '{message}': {error}. {CHECK_LINE}")
        if isinstance(error, BenchError):
            return error
        timed_out = isinstance(error, TimeoutError) or getattr(error, "error_code", None) == StatusCode.error_timeout
        if timed_out and self._promised:
            text = f"the block's header says {self._promised} bytes, and fewer arrived before the deadline"
            return ReplyError(f"{self.where}: answer to '{message}': {text}. {CHECK_LINE}")
        if timed_out and not self._hung_up():
            return NoAnswerError(f"{self.where}: did not answer '{message}' within {deadline_s:g} s. {CHECK_LINE}")
        return LinkError(f"{self.where}: the link broke at '{message}' ({reason(error)}). {CHECK_LINE}")

    def _hung_up(self) -> bool:
        """Whether the other end closed a raw socket: pyvisa-py only says time-out then."""
        line = self._socket()
        if line is None:
            return False
        try:
            return line.recv(1, socket.MSG_PEEK | getattr(socket, "MSG_DONTWAIT", 0)) == b""
        except OSError as error:
            return error.errno not in (errno.EAGAIN, errno.EWOULDBLOCK)


CHECK_LINE = "Check that it is on, its cable, and that nobody else talks to it"


def reason(error: Exception) -> str:
    """Return a library's error in one line, without its code's number."""
    if getattr(error, "error_code", None) == StatusCode.error_resource_not_found:
        return "no connection"
    text = str(getattr(error, "description", "") or getattr(error, "strerror", "") or error).strip().rstrip(".")
    return " ".join(text.split()) or type(error).__name__
