"""HiSLIP locks (IVI-6.1, cited from memory)."""

from __future__ import annotations

import threading

# What AsyncLockResponse says.
LOCK_FAILURE, LOCK_EXCLUSIVE, LOCK_SHARED, LOCK_ERROR = 0, 1, 2, 3


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
