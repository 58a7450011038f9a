"""Hook specifications: how a plugin hands in drivers and steps. Entry point group: benchrun.plugins."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Protocol

import pluggy
from pydantic import BaseModel

from benchrun.contract.actions import Action
from benchrun.contract.clock import Clock
from benchrun.contract.roles import DcSupply, Instrument, InstrumentSettings, Link

PROJECT = "benchrun"
ENTRY_POINT_GROUP = "benchrun.plugins"
hookspec = pluggy.HookspecMarker(PROJECT)
hookimpl = pluggy.HookimplMarker(PROJECT)


@dataclass(frozen=True, slots=True)
class DriverSpec:
    """One driver: the name that bench files use, its role, the dialect it falls back to, and how to build it.

    `dialect` is the text of a dialect file (YAML) that holds the generic SCPI-1999 entries. `needs` are the entries
    without which the driver cannot work; `optional` those that add a capability; `following` those of them without
    which a source cannot follow a receiver's sweep, or a receiver cannot lead one (empty: it never can). `build` gets
    the link and what the bench says of the instrument.
    """

    name: str
    role: str
    help: str
    dialect: str
    needs: tuple[str, ...]
    build: Callable[[Link, InstrumentSettings], Instrument]
    optional: tuple[str, ...] = ()
    following: tuple[str, ...] = ()


class StepScope(Protocol):
    """What a step may ask while it expands (no I/O): values in force, the bench's names, and references."""

    @property
    def conditions(self) -> Mapping[str, float]:
        """Values in force by full name: sweep variables ("frequency", "drive") and settables ("pump.level"), SI."""

    @property
    def signals(self) -> tuple[str, ...]:
        """Names of the bench's signals ("pump", "probe")."""

    @property
    def receivers(self) -> tuple[str, ...]:
        """Names of the bench's receivers ("incident", "reflected")."""

    @property
    def if_bandwidth_hz(self) -> float:
        """The recipe's IF bandwidth."""

    @property
    def averages(self) -> int:
        """The recipe's averaging count."""

    def value(self, text_or_number: str | float, target: str) -> float:
        """Resolve a quantity, or a sum of references and quantities ("{frequency} - 7 MHz"), for a settable.

        Raises InputError for what cannot be resolved here, and for a value outside what the target takes.
        """

    def levels_dbm(self, signal: str, frequencies_hz: Sequence[float]) -> tuple[float, ...]:
        """Return the level that a signal is to have at each of other frequencies than its own.

        It is that of the drive where one is in force, else the level in force. Raises InputError where neither is.
        """

    def text(self, text: str) -> str:
        """Replace the references to swept words ("{standard}") in a text by what they stand for here."""

    def following_read(self) -> tuple[str, ...]:
        """Signals that the next read step in the same list uses, () where there is none."""


class BenchAccess(Protocol):
    """What a procedure may do to the bench. Ramps, ceilings and safe state hold outside of it."""

    @property
    def clock(self) -> Clock:
        """Clock to wait on."""

    def set(self, target: str, value: float) -> float:
        """Set a settable by full name; returns what stands."""

    def read(self, target: str) -> float:
        """Read a scalar by full name."""

    def supply(self, bias: str) -> DcSupply:
        """Return the supply that carries this bias."""

    def bias_limits(self, bias: str) -> Mapping[str, float]:
        """Limits of this bias from the bench file: voltage_low_v, voltage_high_v, current_limit_a, over_voltage_v.

        Where the bench file gives them, also pinch_off_v (a gate) and released_below_v (a drain).
        """

    def say(self, text: str) -> None:
        """Tell the operator and the archive what was done."""


@dataclass(frozen=True, slots=True)
class StepSpec:
    """One kind of step: the key that recipes use, its pydantic model, and how it expands to actions.

    `expand(model, scope)` yields actions, pure: the same kinds of actions in the same order at any conditions, the
    same readings, the same names set. Values may follow the conditions, but no set may follow what an earlier round of
    a sweep left behind. `execute(parameters, access)` is needed only where it yields a ProcedureAction for itself; it
    returns what it found, for the archive's log. It leaves frequencies and levels as it found them; bias counts as
    unknown after it. `duration_s(action)` is the modelled time of that procedure.
    """

    key: str
    model: type[BaseModel]
    help: str
    expand: Callable[[Any, StepScope], Iterator[Action]]
    execute: Callable[[Mapping[str, Any], BenchAccess], Mapping[str, float]] | None = None
    duration_s: Callable[[Mapping[str, Any]], float] | None = None


@hookspec
def benchrun_drivers() -> Sequence[DriverSpec]:  # type: ignore[empty-body]
    """Return the drivers that this plugin brings."""


@hookspec
def benchrun_steps() -> Sequence[StepSpec]:  # type: ignore[empty-body]
    """Return the step kinds that this plugin brings."""
