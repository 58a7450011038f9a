"""Generic power meter with one sensor; readings in dBm, its calibration factor taken for the frequency it is told."""

from __future__ import annotations

from collections.abc import Mapping
from typing import ClassVar

from benchrun.contract.hooks import DriverSpec
from benchrun.contract.kinds import Readable, Settable

from .over_link import OverLink, generic_dialect


class GenericPowerMeter(OverLink):
    """A power meter that speaks SCPI-1999."""

    SETTABLES: ClassVar[Mapping[str, Settable]] = {
        "frequency": Settable("frequency", "frequency", "frequency that the calibration factor is taken for")
    }
    READABLES: ClassVar[Mapping[str, Readable]] = {"power": Readable("power", "level", "power incident on the sensor")}

    def prepare(self) -> None:
        """Readings in dBm, one at a time, front panel locked. Raises BenchError."""
        self.link.confirm_all(
            self._available(("unit", {"unit": "DBM"}), ("free-run", {"on": False}), ("panel-lock", {"on": True}))
        )

    def make_safe(self) -> None:
        """A power meter drives nothing: it is safe as it is."""


SPEC = DriverSpec(
    name="power-meter",
    role="power-meter",
    help="Power meter by SCPI-1999: power in dBm at a frequency.",
    dialect=generic_dialect("power_meter"),
    needs=("frequency", "unit", "power"),
    optional=("free-run", "panel-lock"),
    build=GenericPowerMeter,
)
