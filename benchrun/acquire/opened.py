"""What the acquisition needs of an open bench; drivers.open_bench gives it, and tests give a smaller one."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from typing import Protocol

from benchrun.contract.roles import DcSupply, Instrument, SignalSource, WaveReceiver
from benchrun.visa.exchange import Exchange


class SessionOf(Protocol):
    """The link of one instrument, as far as a failure makes it interesting."""

    @property
    def exchanges(self) -> Collection[Exchange]:
        """The last exchanges, oldest first."""

    def reopen(self) -> None:
        """Open the link anew. Raises BenchError."""


class OpenBench(Protocol):
    """Instruments that are open, by their names on the bench."""

    def prepare(self) -> None:
        """Bring every instrument to a known state, RF off first. Raises BenchError."""

    @property
    def instruments(self) -> Mapping[str, Instrument]:
        """Every instrument."""

    @property
    def sessions(self) -> Mapping[str, SessionOf]:
        """The link of each instrument."""

    @property
    def receiver(self) -> WaveReceiver:
        """The wave receiver."""

    def signal(self, name: str) -> SignalSource | WaveReceiver:
        """Return the instrument that makes this signal."""

    def supply(self, bias: str) -> DcSupply:
        """Return the supply that carries this bias."""

    def set(self, target: str, value: float) -> float:
        """Set a settable by full name; returns what stands."""

    def read(self, target: str) -> float:
        """Read a scalar by full name."""
