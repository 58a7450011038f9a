"""Generic thermometer."""

from __future__ import annotations

from collections.abc import Mapping
from typing import ClassVar

from benchrun.contract.hooks import DriverSpec
from benchrun.contract.kinds import Readable

from .over_link import OverLink, generic_dialect


class GenericThermometer(OverLink):
    """A thermometer that speaks SCPI-1999."""

    READABLES: ClassVar[Mapping[str, Readable]] = {
        "temperature": Readable("temperature", "temperature", "temperature at the probe")
    }

    def prepare(self) -> None:
        """Readings in degrees Celsius, front panel locked. Raises BenchError."""
        self.link.confirm_all(self._available(("unit", {"unit": "C"}), ("panel-lock", {"on": True})))

    def make_safe(self) -> None:
        """A thermometer drives nothing: it is safe as it is."""


SPEC = DriverSpec(
    name="thermometer",
    role="thermometer",
    help="Thermometer by SCPI-1999: temperature in degrees Celsius.",
    dialect=generic_dialect("thermometer"),
    needs=("temperature",),
    optional=("unit", "panel-lock"),
    build=GenericThermometer,
)
