"""Thermometer: the temperature of the air around the bench."""

from __future__ import annotations

from typing import ClassVar

from ..scpi_command import Command, setting
from ..scpi_errors import ScpiError
from ..scpi_instrument import Instrument
from ..scpi_values import Choice, number

READING_NS = 10_000_000
ZERO_CELSIUS_K = 273.15


class Thermometer(Instrument):
    """Reads one temperature."""

    MAKER = "Merrowby"
    MODEL = "Mere-1"
    FIRMWARE = "1.0"

    def after_reset(self) -> None:
        """No reading yet."""
        self._reading_degc: float | None = None

    def read(self) -> str:
        """READ? and MEASure?: one new reading."""
        self._reading_degc = float(self.bench.world.temperature_degc(self.now_ns))
        self.bench.advance(READING_NS)
        return self.fetch()

    def fetch(self) -> str:
        """FETCh?: the last reading; raises ScpiError -230 where there is none."""
        if self._reading_degc is None:
            raise ScpiError(-230, "no reading yet")
        return number(self._reading_degc + (ZERO_CELSIUS_K if self.value("unit") == "K" else 0.0))

    COMMANDS: ClassVar[tuple[Command, ...]] = (
        setting("UNIT:TEMPerature", "unit", Choice(("C", "CEL", "K")), "C"),
        Command("FETCh[:SCALar][:TEMPerature]", ask=fetch),
        Command("READ[:SCALar][:TEMPerature]", ask=read),
        Command("MEASure[:SCALar][:TEMPerature]", ask=read),
    )
