"""A rehearsal in this process."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from .rack import Rack, VirtualClock
from .visa import SimulatedVisaLibrary, library


class InProcessRehearsal:
    """A world, its clock, and the VISA library that reaches its instruments.

    Tests also reach `rack` (with its world, which knows the truth) and `faults`; the product never does.
    """

    def __init__(self, wiring: Mapping[str, Any], *, seed: int, real_time: bool = False) -> None:
        self.rack = Rack(wiring, seed=seed, real_time=real_time)
        self.seed = seed
        self.faults = self.rack.faults
        self.clock = VirtualClock(self.rack)
        self.visa_library: SimulatedVisaLibrary = library(self.rack)

    @property
    def addresses(self) -> Mapping[str, str]:
        """Resource string of each instrument, by its name on the bench."""
        return self.rack.addresses

    def connect(self, plane: str, what: str) -> None:
        """Do what the operator is asked to do."""
        self.rack.connect(plane, what)

    def close(self) -> None:
        """Close the resource manager that was opened on this library, if it still is."""
        manager = self.visa_library.resource_manager
        if manager is not None:
            manager.close()
