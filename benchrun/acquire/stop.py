"""Ctrl-C, SIGTERM and a terminal that goes away: a request to stop, taken at the next safe point.

The first signal only asks. Where the run waits (an operator, a long settling time) that is a safe point, and the wait
ends at once. A second signal does not wait for the safe point. From then on, and while the bench is made safe, every
further signal is ignored.
"""

from __future__ import annotations

import contextlib
import signal
import threading
from collections.abc import Iterator
from types import FrameType

_NAMES = ("SIGINT", "SIGTERM", "SIGHUP", "SIGBREAK")
_WORDS = {"SIGINT": "Ctrl-C", "SIGBREAK": "Ctrl-Break", "SIGHUP": "SIGHUP (the terminal went away)"}


class StopRequest:
    """Whether somebody wants the run to stop, and who."""

    def __init__(self) -> None:
        self.reason = ""
        #: Nothing is interrupted any more: the bench is being made safe.
        self.deaf = False
        self._waiting = False

    @property
    def requested(self) -> bool:
        """Whether a stop was asked for."""
        return bool(self.reason)

    def request(self, reason: str) -> None:
        """Ask for a stop. Raises KeyboardInterrupt where the run waits, and at the second request."""
        again, self.reason = bool(self.reason), self.reason or reason
        if not self.deaf and (again or self._waiting):
            self.deaf = True
            raise KeyboardInterrupt

    @contextlib.contextmanager
    def waiting(self) -> Iterator[None]:
        """Within this a request ends the wait at once by KeyboardInterrupt."""
        self._waiting = True
        try:
            if self.reason:
                raise KeyboardInterrupt
            yield
        finally:
            self._waiting = False

    @contextlib.contextmanager
    def listening(self) -> Iterator[None]:
        """Take the signals that mean stop, in the main thread, and give them back afterwards."""
        self.deaf = False
        if threading.current_thread() is not threading.main_thread():
            yield
            return
        numbers = [getattr(signal, name) for name in _NAMES if hasattr(signal, name)]
        taken = [number for number in numbers if signal.getsignal(number) is not signal.SIG_IGN]  # nohup's stays
        before = {number: signal.signal(number, self._received) for number in taken}
        try:
            yield
        finally:
            for number, handler in before.items():
                signal.signal(number, signal.SIG_DFL if handler is None else handler)

    def _received(self, number: int, _frame: FrameType | None) -> None:
        name = signal.Signals(number).name
        self.request(_WORDS.get(name, name))
