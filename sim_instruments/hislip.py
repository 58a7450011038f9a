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
import socket
import threading
import time

from .conversation import Conversation, LinkLostError, Reply
from .hislip_locks import Locks
from .hislip_wire import (
    BAD_INITIALIZATION,
    HEADER_SIZE,
    LARGEST_MESSAGE,
    NO_SECOND_CHANNEL,
    UNRECOGNIZED_TYPE,
    FatalProtocolError,
    Message,
    Type,
    Wire,
)
from .listener import Listener, reset
from .rack import Rack

SUB_ADDRESS = b"hislip0"
VERSION = 0x0100
VENDOR = 0x7362  # "sb"
SMALLEST_PAYLOAD = 64
_HANDSHAKE_S = 10.0


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
        self.payload_limit = LARGEST_MESSAGE - HEADER_SIZE
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
        self.payload_limit = max(SMALLEST_PAYLOAD, min(largest, LARGEST_MESSAGE) - HEADER_SIZE)
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
