"""What flow hands to whoever asked: plain records, ready to be printed."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from benchrun.plan.levels import LevelTable


@dataclass(frozen=True, slots=True)
class RunResult:
    """How a run, a rehearsal or a derivation ended, and where its files are."""

    folder: Path
    state: str
    exit_code: int = 0
    table: Sequence[Mapping[str, Any]] = ()
    notes: Sequence[str] = ()
    message: str = ""


@dataclass(frozen=True, slots=True)
class LevelReport:
    """The level check of a recipe on a bench, with what else the schedule says beforehand."""

    table: LevelTable
    readings: int
    axes: str
    duration_s: float
    operator_actions: int
    notes: Sequence[str] = field(default_factory=tuple)

    def to_dict(self) -> dict[str, Any]:
        """Return plain JSON-like data."""
        return {
            "readings": self.readings,
            "axes": self.axes,
            "duration_s": self.duration_s,
            "operator_actions": self.operator_actions,
            "notes": list(self.notes),
            **self.table.to_dict(),
        }
