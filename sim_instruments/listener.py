"""A TCP listener on loopback: one thread for each connection, all of them gone after close()."""

from __future__ import annotations

import contextlib
import socket
import struct
import sys
import threading
import time
from collections.abc import Callable

HOST = "127.0.0.1"
MOST_CONNECTIONS = 64
_JOIN_S = 5.0
_AGAIN_S = 0.05
_LINGER = "hh" if sys.platform == "win32" else "ii"


class Listener:
    """Accepts connections and runs `serve(connection)` for each in a thread of its own.

    What goes wrong on one connection ends that connection alone. Connections beyond MOST_CONNECTIONS are turned away.
    """

    def __init__(self, name: str, serve: Callable[[socket.socket], None]) -> None:
        self._name = name
        self._serve = serve
        self._lock = threading.Lock()
        self._open: dict[socket.socket, threading.Thread] = {}
        self._closing = False
        self._listening = socket.create_server((HOST, 0), backlog=MOST_CONNECTIONS)
        self.port: int = self._listening.getsockname()[1]
        self._accepting = threading.Thread(target=self._accept, name=f"{name} accept", daemon=True)
        self._accepting.start()

    def _accept(self) -> None:
        while True:
            try:
                connection, _ = self._listening.accept()
            except OSError:
                if self._closing:
                    return
                time.sleep(_AGAIN_S)  # too many open files, perhaps: not for ever
                continue
            if not self._admit(connection):
                connection.close()
            if self._closing:
                return

    def _admit(self, connection: socket.socket) -> bool:
        with self._lock:
            if self._closing or len(self._open) >= MOST_CONNECTIONS:
                return False
            connection.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            thread = threading.Thread(target=self._run, args=(connection,), name=self._name, daemon=True)
            self._open[connection] = thread
        thread.start()
        return True

    def _run(self, connection: socket.socket) -> None:
        try:
            with contextlib.suppress(OSError):  # the client went away
                self._serve(connection)
        finally:
            with self._lock:
                self._open.pop(connection, None)
            connection.close()

    def close(self) -> None:
        """Stop listening, end every connection, and wait for their threads."""
        with self._lock:
            self._closing = True
            connections = dict(self._open)
        _shut(self._listening)
        with contextlib.suppress(OSError), socket.create_connection((HOST, self.port), timeout=1.0):
            pass  # where shutting a listening socket wakes nobody, a last visitor does
        self._listening.close()
        for connection in connections:
            _shut(connection)
        for thread in (self._accepting, *connections.values()):
            if thread is not threading.current_thread():
                thread.join(_JOIN_S)


def _shut(connection: socket.socket) -> None:
    with contextlib.suppress(OSError):
        connection.shutdown(socket.SHUT_RDWR)


def reset(connection: socket.socket) -> None:
    """Break a connection so that the client sees a reset, not an orderly end."""
    with contextlib.suppress(OSError):
        connection.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, struct.pack(_LINGER, 1, 0))
    connection.close()
