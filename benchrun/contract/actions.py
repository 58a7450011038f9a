"""The few primitive things that a schedule is made of. Steps expand to these; the runner knows only these.

All are frozen, plain data: a schedule can be hashed, stored, and walked again.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from benchrun.contract.capture import Capture


@dataclass(frozen=True, slots=True)
class SetAction:
    """Set quantities of the bench: full names ("pump.level") to SI values.

    Where a signal's frequency is among them, the runner blanks that signal, sets frequency and then level, and puts
    RF back on if it was on. A level only ever rises by the instrument's ramp.
    """

    values: tuple[tuple[str, float], ...]


@dataclass(frozen=True, slots=True)
class SettleAction:
    """Put on RF of `signals` (all others off) and let `duration_s` of bench time pass."""

    duration_s: float
    signals: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class ReadAction:
    """Take one reading called `name`: RF on for exactly `signals`; waves by `capture` (None: scalars only).

    `scalars` are full names of readable quantities ("drain.current", "meter.power") read after the waves.
    """

    name: str
    capture: Capture | None
    signals: tuple[str, ...]
    scalars: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class AskAction:
    """Ask the operator. RF and drain are off and read back at that moment, before the text is shown.

    `connect` is (plane, what) where something is to be connected: a rehearsal makes that connection itself.
    """

    text: str
    cautions: tuple[str, ...] = ()
    connect: tuple[str, str] | None = None


@dataclass(frozen=True, slots=True)
class ProcedureAction:
    """Let the plugin of step `step` do a closed-loop piece of work (bring-up, levelling) with these SI parameters."""

    step: str
    parameters: Mapping[str, float | str | bool | None] = field(default_factory=dict)


Action = SetAction | SettleAction | ReadAction | AskAction | ProcedureAction
