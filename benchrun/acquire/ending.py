"""How a run's end is told: to the archive in full, to the person in one message."""

from __future__ import annotations

import time
from collections.abc import Iterable
from typing import Any, NamedTuple

from benchrun.acquire.opened import OpenBench
from benchrun.acquire.outcome import Outcome
from benchrun.acquire.performer import Surroundings
from benchrun.acquire.safe_state import SafeReport
from benchrun.acquire.stop import StopRequest
from benchrun.archive.meta import Event, State
from benchrun.errors import BenchrunError, StoppedError, UnsafeError
from benchrun.visa.exchange import Exchange

#: How many exchanges of an instrument that did not fail itself go into the archive.
FEW = 8


class Said(NamedTuple):
    """The last exchanges with one instrument."""

    instrument: str
    exchanges: tuple[Exchange, ...]


def is_failure(error: BaseException | None) -> bool:
    """Whether something went wrong, rather than that somebody stopped the run."""
    return isinstance(error, Exception) and not isinstance(error, StoppedError)


def last_exchanges(bench: OpenBench) -> tuple[Said, ...]:
    """Return the last exchanges of the instruments that failed, or a few of every instrument where none says so."""
    everything = [Said(name, tuple(session.exchanges)) for name, session in bench.sessions.items()]
    failed = tuple(one for one in everything if one.exchanges and one.exchanges[-1].error)
    return failed or tuple(Said(one.instrument, one.exchanges[-FEW:]) for one in everything)


def state(error: BaseException | None, report: SafeReport) -> State:
    """Return in which state the run ended."""
    if not report.safe:
        return "unsafe"
    if error is None:
        return "complete"
    return "stopped" if isinstance(error, KeyboardInterrupt | StoppedError) else "failed"


def cause(error: BaseException | None, stop: StopRequest) -> str:
    """Return in words what ended the run early, "" where nothing did."""
    if error is None:
        return ""
    if isinstance(error, KeyboardInterrupt):
        return f"stopped by {stop.reason or 'Ctrl-C'}"
    return str(error) or type(error).__name__


def log(around: Surroundings, outcome: Outcome, said: Iterable[Said], error: BaseException | None) -> None:
    """Write down what failed, what was said last, and the safe state. Raises DiskError."""
    at_ns = around.clock.now_ns()
    for one in said:
        detail: dict[str, Any] = {"instrument": one.instrument, "exchanges": [each._asdict() for each in one.exchanges]}
        around.writer.log(Event("exchanges", f"last exchanges with {one.instrument}", detail, at_ns))
    if error is not None:
        around.writer.log(Event("failure", outcome.cause, {"error": type(error).__name__}, at_ns))
    safe = outcome.safe
    detail = {"confirmed": safe.confirmed, "unconfirmed": safe.unconfirmed, "reasons": safe.reasons}
    around.writer.log(Event("safe-state", safe.text, detail, at_ns))


def explained(error: BaseException | None, outcome: Outcome, around: Surroundings) -> BaseException:
    """Return the error to raise: one message that says what happened, how the bench was left, and what is safe."""
    text = _message(outcome.cause or str(error or "the run came to its end"), outcome, around)
    if error is None or not outcome.safe.safe:
        return UnsafeError(text)
    if isinstance(error, KeyboardInterrupt):
        return StoppedError(text)
    if isinstance(error, BenchrunError):
        error.args = (text,)
    return error


def _message(cause: str, outcome: Outcome, around: Surroundings) -> str:
    lines = [f"{time.strftime('%H:%M:%S')}  {cause.rstrip('.')}."]
    safe = outcome.safe
    if safe.safe:
        lines.append(f"Made safe: {safe.text}.")
    else:
        lines += [f"{safe.text}.", *(f"  {reason}" for reason in safe.reasons if reason not in cause)]
    lines.append(f"{around.writer.readings} of {outcome.planned} readings are safe in {around.writer.path}.")
    return "\n".join(lines)
