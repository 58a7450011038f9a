"""HiSLIP messages on one connection (IVI-6.1, cited from memory)."""

from __future__ import annotations

import select
import socket
import struct
import threading
from dataclasses import dataclass
from enum import IntEnum

LARGEST_MESSAGE = 1 << 20
_LARGEST_CONTROL_PAYLOAD = 4096
_PARTING_S, _PARTING_READS = 1.0, 64
_HEADER = struct.Struct("!2sBBIQ")
HEADER_SIZE = _HEADER.size


class Type(IntEnum):
    """Message types."""

    INITIALIZE = 0
    INITIALIZE_RESPONSE = 1
    FATAL_ERROR = 2
    ERROR = 3
    ASYNC_LOCK = 4
    ASYNC_LOCK_RESPONSE = 5
    DATA = 6
    DATA_END = 7
    DEVICE_CLEAR_COMPLETE = 8
    DEVICE_CLEAR_ACKNOWLEDGE = 9
    ASYNC_REMOTE_LOCAL_CONTROL = 10
    ASYNC_REMOTE_LOCAL_RESPONSE = 11
    TRIGGER = 12
    INTERRUPTED = 13
    ASYNC_INTERRUPTED = 14
    ASYNC_MAXIMUM_MESSAGE_SIZE = 15
    ASYNC_MAXIMUM_MESSAGE_SIZE_RESPONSE = 16
    ASYNC_INITIALIZE = 17
    ASYNC_INITIALIZE_RESPONSE = 18
    ASYNC_DEVICE_CLEAR = 19
    ASYNC_SERVICE_REQUEST = 20
    ASYNC_STATUS_QUERY = 21
    ASYNC_STATUS_RESPONSE = 22
    ASYNC_DEVICE_CLEAR_ACKNOWLEDGE = 23
    ASYNC_LOCK_INFO = 24
    ASYNC_LOCK_INFO_RESPONSE = 25


# Codes of FatalError and of Error.
BAD_HEADER, NO_SECOND_CHANNEL, BAD_INITIALIZATION = 1, 2, 3
UNRECOGNIZED_TYPE = 1


class FatalProtocolError(Exception):
    """The connection cannot go on; the client is told why."""

    def __init__(self, code: int, text: str) -> None:
        self.code = code
        super().__init__(text)


@dataclass(frozen=True, slots=True)
class Message:
    """One HiSLIP message as it came."""

    type: int
    control: int
    parameter: int
    payload: bytes


class Wire:
    """One connection: whole messages in and out. Sending is safe from several threads."""

    def __init__(self, connection: socket.socket) -> None:
        self.connection = connection
        self._sending = threading.Lock()

    def send(self, kind: Type, control: int = 0, parameter: int = 0, payload: bytes = b"") -> None:
        """Send one message. Raises OSError."""
        header = _HEADER.pack(b"HS", kind, control, parameter, len(payload))
        with self._sending:
            self.connection.sendall(header + payload)

    def send_if_free(self, kind: Type, control: int) -> None:
        """Send a message without payload, unless the client has long stopped reading: this one never waits for it."""
        if not self._sending.acquire(blocking=False):
            return
        try:
            if select.select([], [self.connection], [], 0)[1]:
                self.connection.sendall(_HEADER.pack(b"HS", kind, control, 0, 0))
        finally:
            self._sending.release()

    def end(self, error: FatalProtocolError) -> None:
        """Say why, and let the client read it before the connection is closed. Raises OSError."""
        self.send(Type.FATAL_ERROR, error.code, 0, str(error).encode())
        self.connection.shutdown(socket.SHUT_WR)
        self.connection.settimeout(_PARTING_S)
        for _ in range(_PARTING_READS):
            if not self.connection.recv(_LARGEST_CONTROL_PAYLOAD):
                return

    def receive(self) -> Message | None:
        """Return the next message, or None at the end. Raises FatalProtocolError and OSError."""
        header = self._exactly(_HEADER.size)
        if header is None:
            return None
        prologue, kind, control, parameter, length = _HEADER.unpack(header)
        if prologue != b"HS":
            raise FatalProtocolError(BAD_HEADER, "the message does not begin with HS")
        if length > (LARGEST_MESSAGE if kind in {Type.DATA, Type.DATA_END} else _LARGEST_CONTROL_PAYLOAD):
            raise FatalProtocolError(BAD_HEADER, f"a payload of {length} bytes is too long")
        payload = self._exactly(length) if length else b""
        return None if payload is None else Message(kind, control, parameter, payload)

    def _exactly(self, count: int) -> bytes | None:
        buffer = bytearray(count)
        view = memoryview(buffer)
        while view:
            received = self.connection.recv_into(view)
            if not received:
                return None
            view = view[received:]
        return bytes(buffer)
