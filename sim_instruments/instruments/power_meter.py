"""Power meter: one sensor, its calibration factor applied for the frequency it is told."""

from __future__ import annotations

from typing import ClassVar

from ..scpi_command import Command, setting
from ..scpi_errors import ScpiError
from ..scpi_instrument import Instrument
from ..scpi_values import Choice, Number, number

FREQUENCY_HZ = (10e6, 8e9)
READING_NS = 20_000_000

_FREQUENCY = Number("HZ", *FREQUENCY_HZ, 50e6)


class PowerMeter(Instrument):
    """Reads the power that is incident on its sensor."""

    MAKER = "Ostrelby"
    MODEL = "Beck-1"
    FIRMWARE = "1.12"

    def after_reset(self) -> None:
        """No reading yet."""
        self._reading: float | None = None
        self._coming: float | None = None

    def changed(self, key: str, *suffixes: int) -> None:  # noqa: ARG002
        """A new frequency or average makes the reading stale."""
        if key != "unit":
            self.abort()
            self._reading = None

    def initiate(self) -> None:
        """INITiate: start one reading."""
        if self.busy_until_ns is not None:
            raise ScpiError(-213)
        self._reading = None
        self._coming = float(self.bench.world.measure_power(self.name, self.value("frequency"), self.now_ns))
        self.busy_for(READING_NS * int(self.value("averages")))

    def finished(self) -> None:
        """The reading stands."""
        self._reading, self._coming = self._coming, None

    def abort(self) -> None:
        """ABORt: end a running reading."""
        self.busy_until_ns, self._coming = None, None

    def fetch(self) -> str:
        """FETCh?: the last reading, after the running one; raises ScpiError -230 where there is none."""
        self.wait()
        if self._reading is None:
            raise ScpiError(-230, "no reading since the last setting")
        watts = self.value("unit") == "W"
        return number(10.0 ** ((self._reading - 30.0) / 10.0) if watts else self._reading)

    def read(self) -> str:
        """READ? and MEASure?: one new reading."""
        self.abort()
        self.initiate()
        return self.fetch()

    COMMANDS: ClassVar[tuple[Command, ...]] = (
        setting("[SENSe:]FREQuency[:CW|FIXed]", "frequency", _FREQUENCY, 50e6),
        setting("[SENSe:]AVERage:COUNt", "averages", Number("", 1, 1024, 1, integer=True), 1),
        setting("UNIT:POWer", "unit", Choice(("DBM", "W")), "DBM"),
        Command("INITiate[:IMMediate]", initiate),
        Command("ABORt", abort),
        Command("FETCh[:SCALar][:POWer][:AC]", ask=fetch),
        Command("READ[:SCALar][:POWer][:AC]", ask=read),
        Command("MEASure[:SCALar][:POWer][:AC]", ask=read),
    )
