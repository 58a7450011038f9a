"""What a rehearsal offers, reached through the entry point group benchrun.rehearsal (it imports nothing of ours)."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Protocol

from benchrun.contract.clock import Clock

ENTRY_POINT_GROUP = "benchrun.rehearsal"


class Rehearsal(Protocol):
    """A simulated bench in use. It never tells the truth about its world to the product."""

    @property
    def clock(self) -> Clock:
        """The world's virtual time."""

    @property
    def seed(self) -> int:
        """Seed of the world."""

    @property
    def visa_library(self) -> Any:
        """A pyvisa VisaLibraryBase for ResourceManager, or None where the bench is reached over the network."""

    @property
    def addresses(self) -> Mapping[str, str]:
        """Resource string of each instrument, by its name on the bench."""

    def connect(self, plane: str, what: str) -> None:
        """Do what the operator is asked to do: connect `what` ("open", "meter", "device") to `plane`."""

    def close(self) -> None:
        """End the world's part in this run."""


class Served(Protocol):
    """A simulated bench behind HiSLIP and raw sockets on loopback."""

    @property
    def hislip(self) -> Mapping[str, str]:
        """HiSLIP resource string of each instrument."""

    @property
    def sockets(self) -> Mapping[str, str]:
        """Raw-socket resource string of each instrument."""

    @property
    def channel(self) -> str:
        """Address (host:port) of the rehearsal channel."""

    def close(self) -> None:
        """Stop serving."""


class RehearsalPlugin(Protocol):
    """What the entry point's module offers."""

    def open_in_process(self, wiring: Mapping[str, Any], *, seed: int, real_time: bool = False) -> Rehearsal:
        """Build a world in this process."""

    def open_channel(self, address: str, *, real_time: bool = False) -> Rehearsal:
        """Join a served bench by the address of its rehearsal channel; starts its world anew at time 0."""

    def serve(self, wiring: Mapping[str, Any], *, seed: int) -> Served:
        """Serve a world on loopback until close()."""
