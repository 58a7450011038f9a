"""Two-channel dc supply: channel 1 for gates (both polarities), channel 2 for drains; protections that trip."""

from __future__ import annotations

from typing import ClassVar

from ..scpi_command import Command, setting
from ..scpi_errors import ScpiError
from ..scpi_instrument import Instrument
from ..scpi_values import Boolean, ChannelList, Number, number

CHANNELS = 2
VOLTAGE_V = {1: (-20.0, 20.0), 2: (0.0, 60.0)}
CURRENT_A = {1: 1.0, 2: 6.0}
TRIP_V = {1: 22.0, 2: 66.0}
LEAST_TRIP_V = 0.1
SETTLE_NS = 1_000_000
READING_NS = 5_000_000
VOLTAGE_BIT, CURRENT_BIT = 0, 1  # of STATus:QUEStionable: a protection has tripped
AT_LIMIT = 0.99  # of the current limit, as read: below it for certain, given the accuracy of the reading

_VOLTAGE = Number("V", lambda _, n: VOLTAGE_V[n][0], lambda _, n: VOLTAGE_V[n][1], 0.0)
_CURRENT = Number("A", 0.0, lambda _, n: CURRENT_A[n], lambda _, n: CURRENT_A[n])
_TRIP = Number("V", LEAST_TRIP_V, lambda _, n: TRIP_V[n], lambda _, n: TRIP_V[n])
_EACH = (CHANNELS,)


class DcSupply(Instrument):
    """A supply whose outputs hold voltage until the current limit, then current.

    The over-voltage trip looks at the magnitude of the voltage; the over-current trip, where it is on, trips as soon as
    the channel comes to its current limit. A tripped output is off and stays off until its protection has been cleared.
    *RST switches the outputs off, channel 1 first, and opens limits and trips to their largest values.
    """

    MAKER = "Dunwhistle"
    MODEL = "Crag-2"
    FIRMWARE = "3.7"

    def power_on(self) -> None:
        """Nothing has tripped."""
        self.tripped: dict[tuple[str, int], bool] = {}
        super().power_on()

    def after_reset(self) -> None:
        """Outputs off, trips cleared."""
        self.tripped.clear()
        for channel in range(1, CHANNELS + 1):
            self._update(channel)
        self._show_trips()

    def changed(self, key: str, *suffixes: int) -> None:
        """Carry a channel's settings to the world and see whether that trips it."""
        channel = suffixes[0]
        if key == "output" and self.settings[(key, channel)] and self._any_tripped(channel):
            self.settings[(key, channel)] = False
            raise ScpiError(-221, f"a protection of channel {channel} has tripped")
        self._update(channel)

    def settle(self) -> None:
        """Look at the protections: what the bench does may trip them at any time."""
        super().settle()
        self._guard()

    # ---- protections ------------------------------------------------------------------------------------------

    def disturbed(self) -> None:
        """Look at the currents, now that something else on the bench has changed."""
        for channel in range(1, CHANNELS + 1):
            if self.value("output", channel) and self.value("over-current", channel):
                self._look(channel)

    def _guard(self) -> None:
        for channel in range(1, CHANNELS + 1):
            if self.value("output", channel):
                self._look(channel)

    def _look(self, channel: int) -> None:
        volts, amperes = self.bench.world.supply_reading(self.name, channel)
        limit = self.value("current", channel)
        if abs(volts) > self.value("over-voltage", channel):
            self._trip("voltage", channel)
        if self.value("over-current", channel) and abs(amperes) >= AT_LIMIT * limit:
            self._trip("current", channel)

    def _trip(self, which: str, channel: int) -> None:
        self.tripped[(which, channel)] = True
        self.settings[("output", channel)] = False
        self._update(channel)
        self._show_trips()

    def _any_tripped(self, channel: int) -> bool:
        return any(on for (_, number_), on in self.tripped.items() if number_ == channel)

    def _show_trips(self) -> None:
        for which, bit in (("voltage", VOLTAGE_BIT), ("current", CURRENT_BIT)):
            on = any(self.tripped.get((which, channel), False) for channel in range(1, CHANNELS + 1))
            self.status.questionable.put(bit, on)

    def voltage_tripped(self, channel: int) -> str:
        """Answer to VOLTage:PROTection:TRIPped?."""
        return Boolean().show(self.tripped.get(("voltage", channel), False))

    def current_tripped(self, channel: int) -> str:
        """Answer to CURRent:PROTection:TRIPped?."""
        return Boolean().show(self.tripped.get(("current", channel), False))

    def clear_voltage_trip(self, channel: int) -> None:
        """VOLTage:PROTection:CLEar: the output stays off."""
        self.tripped[("voltage", channel)] = False
        self._show_trips()

    def clear_current_trip(self, channel: int) -> None:
        """CURRent:PROTection:CLEar: the output stays off."""
        self.tripped[("current", channel)] = False
        self._show_trips()

    # ---- readings ---------------------------------------------------------------------------------------------

    def _reading(self, channel: int) -> tuple[float, float]:
        reading = self.bench.world.supply_reading(self.name, channel)
        self.bench.advance(READING_NS)
        return float(reading[0]), float(reading[1])

    def measure_voltage(self, channel: int, listed: int | None = None) -> str:
        """Volts at the terminals; a channel list stands above the header's suffix."""
        return number(self._reading(listed or channel)[0])

    def measure_current(self, channel: int, listed: int | None = None) -> str:
        """Amperes out of the terminals."""
        return number(self._reading(listed or channel)[1])

    def _update(self, channel: int) -> None:
        self.bench.world.set_supply(
            self.name,
            channel,
            voltage_v=self.value("voltage", channel),
            current_limit_a=self.value("current", channel),
            on=self.value("output", channel),
        )

    COMMANDS: ClassVar[tuple[Command, ...]] = (
        setting(
            "[SOURce<n>:]VOLTage[:LEVel][:IMMediate][:AMPLitude]", "voltage", _VOLTAGE, 0.0,
            duration_ns=SETTLE_NS, suffix_limits=_EACH,
        ),
        setting(
            "[SOURce<n>:]CURRent[:LEVel|LIMit][:IMMediate][:AMPLitude]", "current", _CURRENT, lambda _, n: CURRENT_A[n],
            duration_ns=SETTLE_NS, suffix_limits=_EACH,
        ),
        setting(
            "[SOURce<n>:]VOLTage:PROTection[:LEVel]", "over-voltage", _TRIP, lambda _, n: TRIP_V[n], suffix_limits=_EACH
        ),
        setting("[SOURce<n>:]CURRent:PROTection:STATe", "over-current", Boolean(), False, suffix_limits=_EACH),
        Command("[SOURce<n>:]VOLTage:PROTection:TRIPped", ask=voltage_tripped, suffix_limits=_EACH),
        Command("[SOURce<n>:]CURRent:PROTection:TRIPped", ask=current_tripped, suffix_limits=_EACH),
        Command("[SOURce<n>:]VOLTage:PROTection:CLEar", clear_voltage_trip, suffix_limits=_EACH),
        Command("[SOURce<n>:]CURRent:PROTection:CLEar", clear_current_trip, suffix_limits=_EACH),
        setting("OUTPut<n>[:STATe]", "output", Boolean(), False, duration_ns=SETTLE_NS, suffix_limits=_EACH),
        Command(
            "MEASure<n>[:SCALar]:VOLTage[:DC]", ask=measure_voltage, suffix_limits=_EACH,
            query_parameters=(ChannelList(CHANNELS),), optional=True,
        ),
        Command(
            "MEASure<n>[:SCALar]:CURRent[:DC]", ask=measure_current, suffix_limits=_EACH,
            query_parameters=(ChannelList(CHANNELS),), optional=True,
        ),
    )  # fmt: skip
