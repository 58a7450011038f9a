"""The HiSLIP protocol, server side (IVI-6.1, version 1.0 messages, synchronized mode; cited from memory).

One server for each instrument, with the sub-address hislip0. A client opens two connections, synchronous and
asynchronous; the second names the session that the first was given. Rules kept here:
- a response carries the MessageID of the message that asked for it;
- a message that comes before the response to the one before was read (its RMT-delivered bit says so) interrupts: -410,
  Interrupted and AsyncInterrupted;
- after AsyncDeviceClear everything on the synchronous channel is thrown away until DeviceClearComplete;
- an exclusive lock keeps the other sessions' messages waiting.
"""

from __future__ import annotations

import contextlib
import itertools
import select
import socket
import struct
import threading
import time
from dataclasses import dataclass
from enum import IntEnum

from .conversation import Conversation, LinkLostError, Reply
from .listener import Listener, reset
from .rack import Rack

SUB_ADDRESS = b"hislip0"
VERSION = 0x0100
VENDOR = 0x7362  # "sb"
LARGEST_MESSAGE = 1 << 20
SMALLEST_PAYLOAD = 64
_LARGEST_CONTROL_PAYLOAD = 4096
_HANDSHAKE_S = 10.0
_PARTING_S, _PARTING_READS = 1.0, 64
_HEADER = struct.Struct("!2sBBIQ")


class Type(IntEnum):
    """Message types (IVI-6.1 table 4)."""

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


# Codes of FatalError and of Error (IVI-6.1 tables 14 and 16).
BAD_HEADER, NO_SECOND_CHANNEL, BAD_INITIALIZATION = 1, 2, 3
UNRECOGNIZED_TYPE, TOO_LARGE = 1, 4

# What AsyncLockResponse says.
LOCK_FAILURE, LOCK_EXCLUSIVE, LOCK_SHARED, LOCK_ERROR = 0, 1, 2, 3


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


class Locks:
    """Who holds the instrument: one session exclusively, or several that share a key."""

    def __init__(self) -> None:
        self._changed = threading.Condition()
        self._exclusive: int | None = None
        self._shared: dict[int, str] = {}
        self._closed = False

    def request(self, session: int, key: str, timeout_s: float) -> int:
        """Wait for a lock; return the response code."""
        with self._changed:
            if self._exclusive == session or (key and session in self._shared):
                return LOCK_ERROR
            if not self._changed.wait_for(lambda: self._closed or self._grantable(session, key), timeout_s):
                return LOCK_FAILURE
            if key:
                self._shared[session] = key
                return LOCK_SHARED
            self._exclusive = session
            return LOCK_EXCLUSIVE

    def _grantable(self, session: int, key: str) -> bool:
        if self._exclusive is not None:
            return False
        others = {other for holder, other in self._shared.items() if holder != session}
        return others <= {key} if key else not others

    def release(self, session: int) -> int:
        """Release the exclusive lock, or else the shared one; return the response code."""
        with self._changed:
            if self._exclusive == session:
                self._exclusive, code = None, LOCK_EXCLUSIVE
            else:
                code = LOCK_SHARED if self._shared.pop(session, None) is not None else LOCK_ERROR
            self._changed.notify_all()
            return code

    def forget(self, session: int) -> None:
        """The session has ended: release all it holds."""
        while self.release(session) != LOCK_ERROR:
            pass

    def info(self) -> tuple[bool, int]:
        """Return whether a session holds it exclusively, and how many hold a lock."""
        with self._changed:
            holders = set(self._shared) | ({self._exclusive} if self._exclusive is not None else set())
            return self._exclusive is not None, len(holders)

    def wait_free(self, session: int) -> None:
        """Wait until no other session keeps this one out."""
        with self._changed:
            self._changed.wait_for(lambda: self._closed or self._admits(session))

    def _admits(self, session: int) -> bool:
        if self._exclusive is not None:
            return self._exclusive == session
        return not self._shared or session in self._shared

    def close(self) -> None:
        """Let everybody go."""
        with self._changed:
            self._closed = True
            self._changed.notify_all()


class HislipSession:
    """One client: its two wires and its conversation with the instrument."""

    def __init__(self, identifier: int, sync: Wire, conversation: Conversation, locks: Locks) -> None:
        self.identifier = identifier
        self.sync = sync
        self.channel: Wire | None = None  # the asynchronous one
        self.conversation = conversation
        self.locks = locks
        self.delivered = True  # whether the client has read the last response
        self.clearing = threading.Event()
        self.payload_limit = LARGEST_MESSAGE - _HEADER.size
        conversation.rack.listeners.add(self.notice)

    def close(self, other: Wire | None) -> None:
        """One wire has ended: release all, and end the other one too."""
        self.conversation.rack.listeners.discard(self.notice)
        self.locks.forget(self.identifier)
        if other is not None:
            with contextlib.suppress(OSError):
                other.connection.shutdown(socket.SHUT_RDWR)

    def notice(self) -> None:
        """Send a service request if the instrument has a new one."""
        if self.channel is None or not self.conversation.instrument.status.service_enable:
            return
        with contextlib.suppress(LinkLostError, OSError):
            if self.conversation.service_requested():
                self.channel.send_if_free(Type.ASYNC_SERVICE_REQUEST, self.conversation.summary_byte())

    # ---- synchronous channel ----------------------------------------------------------------------------------

    def serve_sync(self) -> None:
        """Take messages until the client goes away. Raises OSError, LinkLostError, FatalProtocolError."""
        while (message := self.sync.receive()) is not None:
            if message.type == Type.DEVICE_CLEAR_COMPLETE:
                self._cleared()
            elif self.clearing.is_set():
                continue
            elif message.type in {Type.DATA, Type.DATA_END}:
                self._data(message)
            elif message.type == Type.FATAL_ERROR:
                return
            elif message.type not in {Type.TRIGGER, Type.ERROR}:
                self.sync.send(Type.ERROR, UNRECOGNIZED_TYPE, 0, b"unrecognized message type")

    def _cleared(self) -> None:
        self.conversation.clear()
        self.delivered = True
        self.clearing.clear()
        self.sync.send(Type.DEVICE_CLEAR_ACKNOWLEDGE)

    def _data(self, message: Message) -> None:
        if self.channel is None:
            raise FatalProtocolError(NO_SECOND_CHANNEL, "the asynchronous channel is not open")
        self.locks.wait_free(self.identifier)
        self.delivered = self.delivered or bool(message.control & 1)
        if not self.delivered:
            self._interrupt(message.parameter)
        self.conversation.write(message.payload, end=message.type == Type.DATA_END)
        for reply in self.conversation.take():
            self._respond(reply, message.parameter)

    def _interrupt(self, message_id: int) -> None:
        with self.conversation.rack.lock:
            self.conversation.interrupt()
        self.delivered = True
        self.sync.send(Type.INTERRUPTED, 0, message_id)
        if self.channel is not None:
            self.channel.send(Type.ASYNC_INTERRUPTED, 0, message_id)

    def _respond(self, reply: Reply, message_id: int) -> None:
        """Send a response in messages no longer than the client takes; END comes with the last."""
        if reply.late_s:
            time.sleep(reply.late_s)
        self.delivered = False
        data, limit = reply.data, self.payload_limit
        starts = range(0, len(data), limit)
        for start in starts:
            last = reply.end and start == starts[-1]
            self.sync.send(Type.DATA_END if last else Type.DATA, 0, message_id, data[start : start + limit])

    # ---- asynchronous channel ---------------------------------------------------------------------------------

    def serve_async(self, wire: Wire) -> None:
        """Answer until the client goes away. Raises OSError, LinkLostError, FatalProtocolError."""
        self.channel = wire
        wire.send(Type.ASYNC_INITIALIZE_RESPONSE, 0, VENDOR)
        while (message := wire.receive()) is not None:
            self._answer(wire, message)

    def _answer(self, wire: Wire, message: Message) -> None:
        match message.type:
            case Type.ASYNC_MAXIMUM_MESSAGE_SIZE if len(message.payload) == 8:
                self._agree_on_size(wire, int.from_bytes(message.payload, "big"))
            case Type.ASYNC_STATUS_QUERY:
                self.delivered = self.delivered or bool(message.control & 1)
                wire.send(
                    Type.ASYNC_STATUS_RESPONSE, self.conversation.status_byte(message_available=not self.delivered)
                )
            case Type.ASYNC_DEVICE_CLEAR:
                self.clearing.set()
                wire.send(Type.ASYNC_DEVICE_CLEAR_ACKNOWLEDGE)
            case Type.ASYNC_LOCK:
                wire.send(Type.ASYNC_LOCK_RESPONSE, self._lock(message))
            case Type.ASYNC_LOCK_INFO:
                exclusive, holders = self.locks.info()
                wire.send(Type.ASYNC_LOCK_INFO_RESPONSE, int(exclusive), holders)
            case Type.ASYNC_REMOTE_LOCAL_CONTROL:
                self._remote_local(message.control)
                wire.send(Type.ASYNC_REMOTE_LOCAL_RESPONSE)
            case _:
                wire.send(Type.ERROR, UNRECOGNIZED_TYPE, 0, b"unrecognized message type")

    def _agree_on_size(self, wire: Wire, largest: int) -> None:
        self.payload_limit = max(SMALLEST_PAYLOAD, min(largest, LARGEST_MESSAGE) - _HEADER.size)
        wire.send(Type.ASYNC_MAXIMUM_MESSAGE_SIZE_RESPONSE, 0, 0, LARGEST_MESSAGE.to_bytes(8, "big"))

    def _lock(self, message: Message) -> int:
        if message.control == 0:
            return self.locks.release(self.identifier)
        key = message.payload.decode("latin-1")
        return self.locks.request(self.identifier, key, message.parameter / 1000.0)

    def _remote_local(self, control: int) -> None:
        """Lock the front panel (control codes 4 and 5) or give it back (0, 2 and 6)."""
        if control in {0, 2, 4, 5, 6}:
            with self.conversation.rack.lock:
                self.conversation.instrument.panel_locked = control in {4, 5}


class HislipServer:
    """Serves one instrument."""

    def __init__(self, rack: Rack, name: str) -> None:
        self._rack = rack
        self._name = name
        self._locks = Locks()
        self._numbers = itertools.count(1)
        self._sessions: dict[int, HislipSession] = {}
        self._listener = Listener(f"hislip {name}", self._serve)
        self.address = f"TCPIP0::127.0.0.1::{SUB_ADDRESS.decode()},{self._listener.port}::INSTR"

    def close(self) -> None:
        """Stop serving."""
        self._locks.close()
        self._listener.close()

    def _serve(self, connection: socket.socket) -> None:
        wire = Wire(connection)
        try:
            self._begin(wire)
        except FatalProtocolError as error:
            wire.end(error)
        except LinkLostError:
            reset(connection)

    def _begin(self, wire: Wire) -> None:
        wire.connection.settimeout(_HANDSHAKE_S)
        message = wire.receive()
        wire.connection.settimeout(None)
        if message is None:
            return
        if message.type == Type.INITIALIZE:
            self._serve_sync(wire, message)
        elif message.type == Type.ASYNC_INITIALIZE and message.parameter in self._sessions:
            self._serve_async(wire, self._sessions[message.parameter])
        else:
            raise FatalProtocolError(BAD_INITIALIZATION, "neither Initialize nor AsyncInitialize of a session")

    def _serve_sync(self, wire: Wire, message: Message) -> None:
        if message.payload.lower() != SUB_ADDRESS:
            raise FatalProtocolError(BAD_INITIALIZATION, "the sub-address is hislip0")
        if self._rack.faults.refuses_open(self._name):
            raise LinkLostError(self._name)
        identifier = next(self._numbers) & 0xFFFF
        conversation = Conversation(self._rack, self._name, message_based=True)
        session = HislipSession(identifier, wire, conversation, self._locks)
        self._sessions[identifier] = session
        try:
            wire.send(Type.INITIALIZE_RESPONSE, 0, VERSION << 16 | identifier)
            session.serve_sync()
        finally:
            self._sessions.pop(identifier, None)
            session.close(session.channel)

    def _serve_async(self, wire: Wire, session: HislipSession) -> None:
        if session.channel is not None:
            raise FatalProtocolError(BAD_INITIALIZATION, "the session has its asynchronous channel")
        try:
            session.serve_async(wire)
        finally:
            session.close(session.sync)
