"""One exchange: settings and queries made into one message, and its answer taken apart again. Pure text, no I/O.

Compound messages (IEEE 488.2 7.3, SCPI-1999 volume 1 section 6.2.4, from memory): units are separated by semicolons; a
header that follows one is looked up in the path of the one before unless it begins with a colon or is a common command
(*OPC?), which leaves the path alone. So every later header here begins with a colon. Each query answers one unit,
separated by semicolons.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, NamedTuple

from benchrun.contract.roles import Call, Value
from benchrun.errors import ReplyError
from benchrun.visa import scpi
from benchrun.visa.dialect import Dialect, Entry

#: Asks for the oldest entry of the error queue (SCPI-1999 volume 2 chapter 21; short for SYSTem:ERRor[:NEXT]?).
ERROR_QUERY = "SYST:ERR?"


class Exchange(NamedTuple):
    """What was said, for the archive: bench time (ns), text sent and received, and what was wrong ("": nothing)."""

    time_ns: int
    sent: str
    received: str
    error: str


@dataclass(frozen=True, slots=True)
class Use:
    """An entry with the values it is used with."""

    entry: Entry
    values: Mapping[str, Value]


def uses(dialect: Dialect, calls: Sequence[Call]) -> list[Use]:
    """Look the entries of calls up. Raises InstrumentError for an unknown one."""
    return [Use(dialect[name], values) for name, values in calls]


def compose(sets: Sequence[Use], asks: Sequence[Use]) -> str:
    """Return one message: the settings, *OPC? where there are any, the queries, and the error query."""
    units = [use.entry.set_text(use.values) for use in sets]
    if sets:
        units.append("*OPC?")
    units += [use.entry.ask_text(use.values) for use in asks]
    return join([*units, ERROR_QUERY])


def join(units: Sequence[str]) -> str:
    """Join message units, each header from the root: ["A:B 1", "*OPC?", "C?"] -> "A:B 1;*OPC?;:C?"."""
    first, *rest = units
    return ";".join([first, *(unit if unit[0] == "*" else ":" + unit for unit in rest)])


@dataclass(frozen=True, slots=True)
class Answer:
    """The units of an answer before the error entry, and that entry."""

    units: tuple[str, ...]
    error: scpi.ErrorEntry


def take_apart(text: str) -> Answer:
    """Split the answer to a composed message. Raises ReplyError where its end is no error entry."""
    *units, last = scpi.split(text, ";")
    return Answer(tuple(units), scpi.parse_error(last))


def read_values(answer: Answer, completed: bool, asks: Sequence[Use]) -> tuple[Any, ...]:
    """Return the typed replies of an answer without error. Raises ReplyError for a wrong count or kind of replies."""
    units = answer.units
    if completed:
        if not units or units[0].strip() != "1":
            first = repr(units[0]) if units else "nothing"
            raise ReplyError(f"*OPC? is answered with 1; this answer begins with {first}")
        units = units[1:]
    if len(units) != len(asks):
        raise ReplyError(f"{len(asks)} replies were expected, {len(units)} came: {'; '.join(units)!r}")
    return tuple(use.entry.read(unit) for use, unit in zip(asks, units, strict=True))
