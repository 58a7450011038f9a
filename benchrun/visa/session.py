"""The VISA seam as everybody else sees it: a Bus owns the resource manager and opens sessions.

Libraries are shared by class and path, and closing a manager ends all of its sessions. So sessions close first, the
manager last, and only by the last bus that uses it.
"""

from __future__ import annotations

import threading
from collections import Counter, deque
from typing import ClassVar

import pyvisa
from pyvisa.highlevel import VisaLibraryBase

from benchrun.contract.clock import Clock
from benchrun.errors import LinkError
from benchrun.visa.dialect import Dialect
from benchrun.visa.exchange import Exchange
from benchrun.visa.link import Session
from benchrun.visa.wire import Wire, reason

__all__ = ["Bus", "Session"]


class Bus:
    """Owns the one resource manager. `backend` is a word that pyvisa knows ("py", "ivi") or a VISA library object."""

    _users: ClassVar[Counter[int]] = Counter()
    _lock: ClassVar[threading.Lock] = threading.Lock()

    def __init__(self, backend: str | VisaLibraryBase = "py") -> None:
        with self._lock:
            try:
                self._manager = pyvisa.ResourceManager(f"@{backend}" if isinstance(backend, str) else backend)
            except Exception as error:
                raise LinkError(
                    f"VISA backend {backend!r} cannot be used ({reason(error)}). Choose another under visa: backend:"
                ) from error
            self._users[id(self._manager)] += 1
        self._sessions: list[Session] = []
        self._open = True

    def open(
        self,
        name: str,
        address: str,
        dialect: Dialect,
        *,
        clock: Clock,
        ceiling_dbm: float | None = None,
        ramp_db: float | None = None,
        transcript: deque[Exchange] | None = None,
    ) -> Session:
        """Open an instrument. Nothing is said to it yet. Raises LinkError where nothing listens at the address."""
        wire = Wire(self._manager, name, address)
        wire.open()
        session = Session(wire, dialect, clock=clock, ceiling_dbm=ceiling_dbm, ramp_db=ramp_db, transcript=transcript)
        self._sessions.append(session)
        return session

    def close(self) -> None:
        """Close all sessions, then the manager unless another bus still uses it. Twice does no harm."""
        if not self._open:
            return
        self._open = False
        for session in self._sessions:
            session.close()
        with self._lock:
            self._users[id(self._manager)] -= 1
            if self._users[id(self._manager)] == 0:
                del self._users[id(self._manager)]
                self._manager.close()

    def __enter__(self) -> Bus:
        return self

    def __exit__(self, *_exception: object) -> None:
        self.close()
