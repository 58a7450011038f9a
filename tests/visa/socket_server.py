"""One scripted instrument behind a raw socket on loopback, for pyvisa-py; it can hang up, trickle, or say nothing."""

from __future__ import annotations

import contextlib
import socket
import threading
from typing import Any


class SocketServer:
    """Serves `instrument.receive(message) -> bytes` line by line, one connection after the other."""

    def __init__(self, instrument: Any) -> None:
        self.instrument = instrument
        self.hang_up_after: int | None = None
        self.connections = 0
        self._listener = socket.create_server(("127.0.0.1", 0))
        self._open: list[socket.socket] = []
        self._thread = threading.Thread(target=self._serve, daemon=True)
        self._thread.start()

    @property
    def address(self) -> str:
        """VISA resource string of the server."""
        return f"TCPIP0::127.0.0.1::{self._listener.getsockname()[1]}::SOCKET"

    def close(self) -> None:
        """Stop serving and hang up."""
        with contextlib.suppress(OSError):
            self._listener.shutdown(socket.SHUT_RDWR)
        self._listener.close()
        for line in self._open:
            with contextlib.suppress(OSError):
                line.shutdown(socket.SHUT_RDWR)
            line.close()
        self._thread.join(timeout=5)

    def _serve(self) -> None:
        while True:
            try:
                line, _ = self._listener.accept()
            except OSError:
                return
            self.connections += 1
            self._open.append(line)
            line.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
            threading.Thread(target=self._talk, args=(line,), daemon=True).start()

    def _talk(self, line: socket.socket) -> None:
        with line, line.makefile("rb") as messages:
            try:
                for message in messages:
                    if self.hang_up_after == 0:
                        self.hang_up_after = None
                        return
                    if self.hang_up_after is not None:
                        self.hang_up_after -= 1
                    line.sendall(self.instrument.receive(message.rstrip(b"\n").decode("ascii")))
            except OSError:
                return
