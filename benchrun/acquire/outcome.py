"""How an acquisition ended."""

from __future__ import annotations

from dataclasses import dataclass

from benchrun.acquire.safe_state import SafeReport
from benchrun.archive.meta import State


@dataclass(frozen=True, slots=True)
class Outcome:
    """How an acquisition ended: readings committed, flagged and skipped of those planned, and how safe the bench is.

    `cause` is what stopped it, "" where it ran to its end.
    """

    state: State
    readings: int
    planned: int
    flagged: int
    skipped: int
    safe: SafeReport
    cause: str = ""

    @property
    def unconfirmed(self) -> tuple[str, ...]:
        """What could not be confirmed to be off."""
        return self.safe.unconfirmed


def attach(error: BaseException, outcome: Outcome) -> None:
    """Let an error carry the outcome of the run that it ended."""
    error.__dict__["outcome"] = outcome


def outcome_of(error: BaseException) -> Outcome | None:
    """Return the outcome that an error carries, None where it ended no run."""
    found = getattr(error, "outcome", None)
    return found if isinstance(found, Outcome) else None
