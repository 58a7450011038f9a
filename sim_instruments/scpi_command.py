"""Declaration of commands: one header with what its set form does and what its query answers."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from .scpi_values import LimitName, Number, Parameter

if TYPE_CHECKING:
    from .scpi_instrument import Instrument

Answer = str | bytes


@dataclass(frozen=True)
class Command:
    """One header with its set form, its query form, or both.

    `act(instrument, *suffixes, *values)` does the set form, `ask(instrument, *suffixes, *values)` answers the query.
    A parameter may be left out where `optional` says so. `duration_ns` passes after the set form.
    """

    header: str
    act: Callable[..., None] | None = None
    ask: Callable[..., Answer] | None = None
    parameters: tuple[Parameter, ...] = ()
    query_parameters: tuple[Parameter, ...] = ()
    optional: bool = False
    duration_ns: int = 0
    suffix_limits: tuple[int, ...] = ()
    indefinite: bool = False
    setting: Setting | None = None


@dataclass(frozen=True)
class Setting:
    """What a command's setting is called, and its value after *RST (a function of the instrument where it depends)."""

    key: str
    reset: Any

    def after_reset(self, instrument: Instrument, suffixes: tuple[int, ...]) -> Any:
        """Return the *RST value."""
        return self.reset(instrument, *suffixes) if callable(self.reset) else self.reset


def setting(
    header: str,
    key: str,
    parameter: Parameter,
    reset: Any,
    *,
    duration_ns: int = 0,
    suffix_limits: tuple[int, ...] = (),
) -> Command:
    """Return a command that keeps a value under `key`, tells the instrument that it changed, and answers its query."""

    def act(instrument: Instrument, *arguments: Any) -> None:
        *suffixes, value = arguments
        instrument.put(key, tuple(suffixes), value)

    def ask(instrument: Instrument, *arguments: Any) -> str:
        suffixes = arguments[: len(suffix_limits)]
        asked = arguments[len(suffix_limits) :]
        return parameter.show(asked[0] if asked else instrument.settings[(key, *suffixes)])

    limits = (LimitName(parameter),) if isinstance(parameter, Number) else ()
    return Command(
        header, act, ask, (parameter,), limits, optional=True, duration_ns=duration_ns, suffix_limits=suffix_limits,
        setting=Setting(key, reset),
    )  # fmt: skip
