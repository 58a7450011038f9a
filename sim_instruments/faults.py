"""Faults for tests: make the n-th exchange go wrong.

An exchange is one program message that arrives at an instrument. `at` counts from 1: those of one instrument where the
fault names it, else those of the whole bench. `times` is how many exchanges in a row are hit; None is for ever.

    rehearsal.faults.add("no-answer", at=12)
    rehearsal.faults.add("connection-reset", at=3, instrument="pump", refuse=2)
"""

from __future__ import annotations

import math
import re
import struct
from collections import Counter
from dataclasses import dataclass
from typing import Literal, get_args

Kind = Literal[
    "no-answer",  # the instrument hangs: nothing is executed, nothing comes back
    "lost-answer",  # executed, but nothing comes back
    "late-answer",  # executed; the answer comes `delay_s` later
    "garbage",  # bytes that are no answer
    "half-block",  # half of the answer, then silence
    "short-block",  # the answer ends early: fewer bytes than its block's header says
    "wrong-length",  # a sound block with one float64 too few
    "nan",  # not a number where a number was
    "error-entry",  # executed, but an error stands in the queue (and answers a SYSTem:ERRor? of the same message)
    "connection-reset",  # the link breaks before anything is executed
    "reset-after",  # the link breaks after the message was executed
    "power-cycle",  # the instrument restarts, as after switching on, and the link breaks
]

GARBAGE = b"\xff\x00?garbage\xfe\n"
_BLOCK = re.compile(rb"#([1-9])")
_NUMBER = re.compile(rb"[+-]?[0-9][0-9.]*(?:E[+-][0-9]+)?")


@dataclass(frozen=True, slots=True)
class Fault:
    """One planned fault; `refuse` is how many attempts to open the link again fail after it broke."""

    kind: Kind
    at: int
    instrument: str | None = None
    times: int | None = 1
    delay_s: float = 10.0
    number: int = -240
    detail: str = "planned fault"
    refuse: int = 0

    def hits(self, exchange: int) -> bool:
        """Whether it strikes at this count."""
        return exchange >= self.at and (self.times is None or exchange < self.at + self.times)


class FaultInjector:
    """Counts exchanges and says which of them fail."""

    def __init__(self) -> None:
        self.planned: list[Fault] = []
        self.exchanges = 0
        self.by_instrument: Counter[str] = Counter()
        self._refused: Counter[str] = Counter()

    def add(
        self,
        kind: Kind,
        *,
        at: int,
        instrument: str | None = None,
        times: int | None = 1,
        delay_s: float = 10.0,
        number: int = -240,
        detail: str = "planned fault",
        refuse: int = 0,
    ) -> Fault:
        """Plan a fault and return it. Raises ValueError for a kind that does not exist or a count below 1."""
        if kind not in get_args(Kind):
            raise ValueError(f"{kind} is not a fault; there are {', '.join(get_args(Kind))}")
        if at < 1:
            raise ValueError("exchanges are counted from 1")
        fault = Fault(kind, at, instrument, times, delay_s, number, detail, refuse)
        self.planned.append(fault)
        return fault

    def clear(self) -> None:
        """Plan nothing any more; the counts go on."""
        self.planned.clear()
        self._refused.clear()

    def restart(self) -> None:
        """Count from 0 again; what is planned stays."""
        self.exchanges = 0
        self.by_instrument.clear()
        self._refused.clear()

    def draw(self, instrument: str) -> Fault | None:
        """Count one exchange and return the first fault that hits it."""
        self.exchanges += 1
        self.by_instrument[instrument] += 1
        for fault in self.planned:
            count = self.exchanges if fault.instrument is None else self.by_instrument[instrument]
            if fault.instrument in {None, instrument} and fault.hits(count):
                self._refused[instrument] += fault.refuse
                return fault
        return None

    def refuses_open(self, instrument: str) -> bool:
        """Whether this attempt to open a link is refused."""
        if self._refused[instrument] <= 0:
            return False
        self._refused[instrument] -= 1
        return True


def mangled(fault: Fault, answer: bytes) -> bytes:
    """Return what arrives instead of `answer` (with its line feed)."""
    match fault.kind:
        case "garbage":
            return GARBAGE
        case "half-block" | "short-block":
            return answer[: max(1, len(answer) // 2)]
        case "wrong-length":
            return _one_float_fewer(answer)
        case "nan":
            return _with_nan(answer)
        case _:
            return answer


def _block(answer: bytes) -> tuple[int, int, int] | None:
    """Return start of the block, start and end of its payload."""
    found = _BLOCK.search(answer)
    if found is None:
        return None
    payload = found.end() + int(found[1])
    return found.start(), payload, payload + int(answer[found.end() : payload])


def _one_float_fewer(answer: bytes) -> bytes:
    where = _block(answer)
    if where is None:
        return answer[:-2] + b"\n"
    start, payload, end = where
    length = str(end - payload - 8).encode()
    return answer[:start] + b"#%d%s" % (len(length), length) + answer[payload : end - 8] + answer[end:]


def _with_nan(answer: bytes) -> bytes:
    where = _block(answer)
    if where is None:
        return _NUMBER.sub(b"9.91E+37", answer, count=1)
    _, payload, end = where
    middle = payload + (end - payload) // 16 * 8
    return answer[:middle] + struct.pack(">d", math.nan) + answer[middle + 8 :]
