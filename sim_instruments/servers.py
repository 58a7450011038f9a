"""The simulated bench on loopback: each instrument behind HiSLIP and behind a raw socket, and the rehearsal channel."""

from __future__ import annotations

import socket
import time
from collections.abc import Mapping
from typing import Any

from .channel import ChannelServer
from .conversation import Conversation, LinkLostError
from .hislip import HislipServer
from .listener import Listener, reset
from .rack import Rack

_CHUNK = 1 << 16


class SocketServer:
    """One instrument behind a raw socket: messages end with a line feed, a line feed inside a block is data."""

    def __init__(self, rack: Rack, name: str) -> None:
        self._rack = rack
        self._name = name
        self._listener = Listener(f"socket {name}", self._serve)
        self.address = f"TCPIP0::127.0.0.1::{self._listener.port}::SOCKET"

    def _serve(self, connection: socket.socket) -> None:
        if self._rack.faults.refuses_open(self._name):
            reset(connection)
            return
        conversation = Conversation(self._rack, self._name, message_based=False)
        try:
            while data := connection.recv(_CHUNK):
                conversation.write(data, end=False)
                for reply in conversation.take():
                    if reply.late_s:
                        time.sleep(reply.late_s)
                    connection.sendall(reply.data)
        except LinkLostError:
            reset(connection)

    def close(self) -> None:
        """Stop serving."""
        self._listener.close()


class ServedBench:
    """All servers of one bench. They run in threads until close()."""

    def __init__(self, wiring: Mapping[str, Any], *, seed: int) -> None:
        self.rack = Rack(wiring, seed=seed)
        self.faults = self.rack.faults
        names = list(self.rack.instruments)
        self._hislip = {name: HislipServer(self.rack, name) for name in names}
        self._sockets = {name: SocketServer(self.rack, name) for name in names}
        self._channel = ChannelServer(self.rack)

    @property
    def hislip(self) -> Mapping[str, str]:
        """HiSLIP resource string of each instrument."""
        return {name: server.address for name, server in self._hislip.items()}

    @property
    def sockets(self) -> Mapping[str, str]:
        """Raw-socket resource string of each instrument."""
        return {name: server.address for name, server in self._sockets.items()}

    @property
    def channel(self) -> str:
        """Address (host:port) of the rehearsal channel."""
        return self._channel.address

    def close(self) -> None:
        """Stop serving."""
        servers: list[HislipServer | SocketServer | ChannelServer] = [self._channel]
        for server in (*servers, *self._hislip.values(), *self._sockets.values()):
            server.close()
